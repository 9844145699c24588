#!/usr/bin/env node
/**
 * `stillwell-gateway`: the gateway's command line. One file a command under commands/; this file only joins them and
 * turns refusals into one line and an exit code: 2 where the person can mend it, 1 where we must.
 */
import { Command, CommanderError } from 'commander';
import { checkCommand } from './commands/check.ts';
import { loadCommand } from './commands/load.ts';
import { runCommand } from './commands/run.ts';
import { statusCommand } from './commands/status.ts';
import { isRefusal } from './config.ts';
import { VERSION } from './version.ts';

const program = new Command('stillwell-gateway')
  .description('Runs a predictive-state model beside a site: live state and forecasts over MQTT. Advisory only.')
  .version(VERSION)
  .configureOutput({ outputError: (text, write) => write(usageLine(text)) })
  .exitOverride();
for (const command of [runCommand, checkCommand, loadCommand, statusCommand])
  program.addCommand(command().copyInheritedSettings(program));

try {
  await program.parseAsync();
} catch (error) {
  process.exitCode = report(error);
}

function report(error: unknown): number {
  if (error instanceof CommanderError) return error.exitCode === 0 ? 0 : 2;
  const message = error instanceof Error ? error.message : String(error);
  process.stderr.write(`stillwell-gateway: ${message}\n`);
  if (isRefusal(error)) return 2;
  if (process.env.STILLWELL_DEBUG && error instanceof Error) process.stderr.write(`${error.stack}\n`);
  return 1;
}

/** The parser's word on a wrong use, which may run over several lines, in the one line that every other refusal has. */
function usageLine(text: string): string {
  const said = text
    .trim()
    .replace(/^error: /, '')
    .replace(/\s*\n\s*/g, ' ')
    .replace(/\.$/, '');
  return `stillwell-gateway: ${said}; add --help for an example\n`;
}
