#!/usr/bin/env node
/**
 * `stillwell`: the trainer's and the desk's command line. One file a command under commands/; this file only joins them
 * and turns refusals into one line and an exit code.
 */
import { ProtocolError } from '@stillwell/protocol';
import { Command, CommanderError } from 'commander';
import { condenseCommand } from './commands/condense.ts';
import { deskCommand } from './commands/desk.ts';
import { fitCommand } from './commands/fit.ts';
import { hindcastCommand } from './commands/hindcast.ts';
import { keysCommand } from './commands/keys.ts';
import { refitCommand } from './commands/refit.ts';
import { rollCommand } from './commands/roll.ts';
import { sealCommand } from './commands/seal.ts';
import { showCommand } from './commands/show.ts';
import { siteCommand } from './commands/site.ts';
import { sizeCommand } from './commands/size.ts';
import { surveyCommand } from './commands/survey.ts';
import { watchCommand } from './commands/watch.ts';
import { TrainError } from './errors.ts';
import { INTERRUPTED_CODE, Interrupted } from './history/interrupt.ts';

const commands: readonly (() => Command)[] = [
  keysCommand,
  sealCommand,
  showCommand,
  siteCommand,
  condenseCommand,
  surveyCommand,
  sizeCommand,
  fitCommand,
  hindcastCommand,
  rollCommand,
  watchCommand,
  deskCommand,
  refitCommand,
];

const program = new Command('stillwell')
  .description('Learns predictive-state models from site histories, seals them, rolls them out and collects residuals.')
  .version('0.1.0')
  .configureOutput({ outputError: (text, write) => write(usageLine(text)) })
  .enablePositionalOptions()
  .exitOverride();
for (const command of commands) program.addCommand(adopt(command(), program));

// Whoever reads our output may have seen enough (`stillwell show … | head`): no error of ours.
process.stdout.on('error', (error: NodeJS.ErrnoException) => {
  if (error.code !== 'EPIPE') throw error;
  process.exit();
});

try {
  await program.parseAsync();
} catch (error) {
  process.exitCode = report(error);
}

/** Gives a command, and those below it, the program's own ways of parsing and refusing. */
function adopt(command: Command, parent: Command): Command {
  command.copyInheritedSettings(parent);
  for (const below of command.commands) adopt(below, command);
  return command;
}

/** One line to standard error; 2 where the person can mend it, 1 where we must. */
function report(error: unknown): number {
  if (error instanceof CommanderError) return error.exitCode === 0 ? 0 : 2;
  const message = error instanceof Error ? error.message : String(error);
  process.stderr.write(`stillwell: ${message}\n`);
  if (error instanceof Interrupted) return INTERRUPTED_CODE;
  if (error instanceof TrainError || error instanceof ProtocolError) return 2;
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
  return `stillwell: ${said}; add --help for an example\n`;
}
