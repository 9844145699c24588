#!/usr/bin/env node
/**
 * `npm run demo`: runs a story with real processes and closes with promise against outcome. Exit code 0 when every
 * promise was kept, 1 when one was broken or the run failed, 2 for a mistaken option, 130 after Ctrl-C.
 */
import { mkdirSync, mkdtempSync, readdirSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join, resolve } from 'node:path';
import { Command, InvalidArgumentError, Option } from 'commander';
import { exitCodeOf, verdictTable } from './check.ts';
import type { Fleet } from './fleet.ts';
import { Narrator } from './progress.ts';
import { practice } from './stories/practice.ts';
import { real } from './stories/real.ts';
import { season } from './stories/season.ts';
import type { Story, StoryResult } from './stories/story.ts';

/** Ctrl-C, or a request to end. */
class Interrupted extends Error {}

interface RunOptions {
  readonly story: string;
  readonly real: boolean;
  readonly keep: boolean;
  readonly days?: number;
  readonly seed: number;
  readonly json: boolean;
  readonly folder?: string;
}

const STORIES: readonly Story[] = [season, real, practice];

const program = new Command('demo')
  .description('Plays a story of a simulated fleet with real gateways, a real broker and a real desk.')
  .addOption(
    new Option('--story <name>', 'which story').choices(STORIES.map((story) => story.name)).default(season.name),
  )
  .option('--real', 'short for --story real: measured data instead of simulated plants', false)
  .option('--keep', 'leave everything running at the end, and the folder where it is', false)
  .option('--days <n>', 'days to play (season: at least 4)', wholeNumber(4, 30))
  .option('--seed <n>', 'seed of plants, sensors and faults', wholeNumber(0, 2 ** 31 - 1), 1)
  .option('--json', 'print the outcome as JSON on standard output, nothing else', false)
  .option('--folder <path>', 'work in this folder, which must be empty or absent, and keep it')
  .addHelpText(
    'after',
    `\nStories:\n${STORIES.map((story) => `  ${story.name}: ${story.summary}`).join('\n')}\n\nExample:\n  npm run demo -- --days 6 --seed 3`,
  )
  .configureOutput({ outputError: (text, write) => write(`demo: ${text}`) });
program.exitOverride((error) => process.exit(error.exitCode === 0 ? 0 : 2));
program.parse();
// Ended outright: a story that was interrupted or failed may still have timers and waits of its own under way.
process.exit(await run(program.opts<RunOptions>()));

async function run(options: RunOptions): Promise<number> {
  const story = options.real ? real : (STORIES.find((one) => one.name === options.story) ?? season);
  const narrator = new Narrator({ quiet: options.json });
  let folder: string;
  try {
    folder = workFolder(options.folder);
  } catch (error) {
    process.stderr.write(`demo: ${(error as Error).message}\n`);
    return 2;
  }
  const isKept = options.keep || options.folder !== undefined;
  const fleets: Fleet[] = [];
  const interruption = new AbortController();
  const end = async (): Promise<void> => {
    for (const fleet of fleets.splice(0)) await fleet.close();
    if (!isKept) rmSync(folder, { recursive: true, force: true });
  };
  const interrupted = new Promise<never>((_, reject) => {
    interruption.signal.addEventListener('abort', () => reject(new Interrupted()));
  });
  interrupted.catch(() => {});
  for (const signal of ['SIGINT', 'SIGTERM', 'SIGHUP'] as const)
    process.on(signal, () => {
      // The second one does not wait: children are killed as the process ends.
      if (interruption.signal.aborted) process.exit(130);
      interruption.abort();
    });
  try {
    const playing = story.play({
      folder,
      seed: options.seed,
      days: options.days ?? null,
      narrator,
      onFleet: (fleet) => fleets.push(fleet),
    });
    const result = await Promise.race([playing, interrupted]);
    narrator.clear();
    tell(options, story, result, narrator.seconds);
    if (options.keep || story.staysOpen) await keep(result, folder, interruption.signal);
    // A story that only stays open has promised nothing that could be broken.
    return story.staysOpen ? 0 : exitCodeOf(result.verdicts);
  } catch (error) {
    narrator.clear();
    if (error instanceof Interrupted) {
      process.stderr.write('demo: interrupted; stopping everything\n');
      return 130;
    }
    process.stderr.write(`demo: ${(error as Error).message}\n`);
    if (process.env.STILLWELL_DEBUG) process.stderr.write(`${(error as Error).stack}\n`);
    return 1;
  } finally {
    await end();
  }
}

function tell(options: RunOptions, story: Story, result: StoryResult, seconds: number): void {
  if (options.json) {
    const { verdicts, figures } = result;
    process.stdout.write(`${JSON.stringify({ story: story.name, seconds, verdicts, figures })}\n`);
  } else
    process.stdout.write(
      `\n${[result.report, ...(result.verdicts.length > 0 ? [verdictTable(result.verdicts)] : [])].join('\n\n')} ` +
        `${seconds.toFixed(0)} s in all.\n`,
    );
}

async function keep(result: StoryResult, folder: string, signal: AbortSignal): Promise<void> {
  process.stderr.write(
    `\nLeft running; Ctrl-C stops it. Folder: ${folder}\n${result.lookAt.map((line) => `  ${line}`).join('\n')}\n`,
  );
  await result.linger(signal);
}

/** The run's folder: a new one under the system's temporary folder, or the one asked for if nothing is in it. */
function workFolder(asked: string | undefined): string {
  if (asked === undefined) return mkdtempSync(join(tmpdir(), 'stillwell-demo-'));
  const folder = resolve(asked);
  mkdirSync(folder, { recursive: true });
  if (readdirSync(folder).length > 0)
    throw new Error(`--folder ${folder}: expected an empty folder or none, got one with files in it; name another`);
  return folder;
}

function wholeNumber(low: number, high: number): (text: string) => number {
  return (text) => {
    const value = Number(text);
    if (!Number.isInteger(value) || value < low || value > high)
      throw new InvalidArgumentError(`expected a whole number from ${low} to ${high}, got "${text}".`);
    return value;
  };
}
