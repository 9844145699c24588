#!/usr/bin/env node
/**
 * `stillwell`: the trainer's and the desk's command line. One file a command under commands/; this file only joins them
 * and turns refusals into one line and an exit code.
 */
import { ProtocolError } from '@stillwell/protocol';
import { Command, CommanderError } from 'commander';
import { TrainError } from './errors.ts';
import { INTERRUPTED_CODE, Interrupted } from './history/interrupt.ts';

/** In the order of the help text. Each is loaded only when it is asked for: all of them take a quarter of a second. */
const commands: Readonly<Record<string, () => Promise<Command>>> = {
  keys: async () => (await import('./commands/keys.ts')).keysCommand(),
  seal: async () => (await import('./commands/seal.ts')).sealCommand(),
  show: async () => (await import('./commands/show.ts')).showCommand(),
  site: async () => (await import('./commands/site.ts')).siteCommand(),
  condense: async () => (await import('./commands/condense.ts')).condenseCommand(),
  survey: async () => (await import('./commands/survey.ts')).surveyCommand(),
  size: async () => (await import('./commands/size.ts')).sizeCommand(),
  fit: async () => (await import('./commands/fit.ts')).fitCommand(),
  hindcast: async () => (await import('./commands/hindcast.ts')).hindcastCommand(),
  roll: async () => (await import('./commands/roll.ts')).rollCommand(),
  watch: async () => (await import('./commands/watch.ts')).watchCommand(),
  ask: async () => (await import('./commands/ask.ts')).askCommand(),
  desk: async () => (await import('./commands/desk.ts')).deskCommand(),
  refit: async () => (await import('./commands/refit.ts')).refitCommand(),
};

const program = new Command('stillwell')
  .description('Learns predictive-state models from site histories, seals them, rolls them out and collects residuals.')
  .version('0.1.0')
  .configureOutput({ outputError: (text, write) => write(usageLine(text)) })
  .enablePositionalOptions()
  .exitOverride();
// Help, a misspelt name and anything else that is no command's name wants them all.
const name = process.argv[2] ?? '';
const asked = Object.hasOwn(commands, name) ? commands[name] : undefined;
const wanted = asked === undefined ? Object.values(commands) : [asked];
for (const make of wanted) program.addCommand(adopt(await make(), program));

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
