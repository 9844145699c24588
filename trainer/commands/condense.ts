/** `stillwell condense`: a sensor of thousands of numbers becomes a few signals that can be fitted like any other. */
import { createHash } from 'node:crypto';
import { existsSync, readdirSync, rmdirSync } from 'node:fs';
import { freemem } from 'node:os';
import { join } from 'node:path';
import { ADVISORY, MIN_TICK_MS, parseInstant } from '@stillwell/protocol';
import { makeFolder } from '@stillwell/runtime/files';
import { Command, InvalidArgumentError } from 'commander';
import { TrainError } from '../errors.ts';
import { several, wholeNumber } from '../option-values.ts';
import { unwritable, writeOutputs } from '../output-file.ts';
import { createProgress } from '../progress.ts';
import { bytesText } from '../text-table.ts';
import { learnCondenser, learningBytes } from '../wide/condense-learn.ts';
import type { CondensePage } from '../wide/condense-page.ts';
import {
  type CondenseScore,
  firstHeldOut,
  type StateSeries,
  scoreCondenser,
  stateSeries,
} from '../wide/condense-states.ts';
import { condenseVerdict } from '../wide/condense-verdict.ts';
import { type Condenser, type CondenserShape, encodeCondenser, readCondenser } from '../wide/condenser.ts';
import { openFrames } from '../wide/open-frames.ts';
import { DEFAULT_NUMBERS, joinRecordings, projectFrames, type Recording } from '../wide/project-frames.ts';
import type { ProjectedFrames } from '../wide/projected-frames.ts';
import { statesCsv } from '../wide/states-csv.ts';

/** States tried where no number is asked for. */
const MOST_STATES = 8;
/** Long rows lie in one memory of the compiled kernels, whose addresses have 32 bits. */
const MOST_BYTES = 4 * 2 ** 30;
/** A row of states where frames come faster than a site's shortest tick. */
const DEFAULT_EVERY_MS = 1000;

interface CondenseOptions {
  readonly frames: string[];
  readonly out: string;
  readonly start?: number;
  readonly tick?: number;
  readonly with?: string;
  readonly window?: number;
  readonly horizon?: number;
  readonly order?: number;
  readonly rank: number;
  readonly projection?: number;
  readonly features?: number;
  readonly every?: number;
  readonly seed?: number;
  readonly json: boolean;
}

/** The command, to be joined to the program. */
export function condenseCommand(): Command {
  return new Command('condense')
    .description(
      'Turns recorded frames of a camera, a spectrum or vibration bins into a few signals ready for fitting.',
    )
    .requiredOption('--frames <files...>', '.npy or .parquet files of one sensor, in order of time', several)
    .requiredOption('--out <folder>', 'folder for states.csv, report.html and, where it learns, condenser.swn')
    .option('--start <time>', 'when the first frame was taken, with a zone, where the files do not say', instant)
    .option('--tick <ms>', 'milliseconds from frame to frame, where the files do not say', milliseconds)
    .option('--with <file>', 'condense as this condenser does, instead of learning one')
    .option('--window <frames>', 'frames of the past a state is made from; 16 by default', wholeNumber(1, 4096))
    .option('--horizon <frames>', 'frames ahead it must forecast; 16 by default', wholeNumber(1, 4096))
    .option('--order <states>', `states; by default as many as pay, up to ${MOST_STATES}`, wholeNumber(1, 64))
    .option('--rank <number>', 'singular values kept while learning', wholeNumber(1, 512), 32)
    .option(
      '--projection <numbers>',
      `numbers a frame is projected to; ${DEFAULT_NUMBERS} by default`,
      wholeNumber(8, 65_536),
    )
    .option('--features <number>', 'random features of a window beside the window itself; none by default', even)
    .option(
      '--every <ms>',
      'milliseconds from row to row of states.csv; the frames’ own, or 1000 where faster than 100',
      milliseconds,
    )
    .option('--seed <number>', 'seed of projection and features; 1 by default', wholeNumber(0, 2 ** 32 - 1))
    .option('--json', 'the result as JSON', false)
    .addHelpText(
      'after',
      '\nExample:\n  stillwell condense --frames kiln.npy --start 2026-03-01T06:00:00Z --tick 40 --out kiln\n' +
        '  stillwell condense --frames kiln-april.npy --start 2026-04-01T06:00:00Z --tick 40 --with kiln/condenser.swn --out april',
    )
    .action(run);
}

async function run(options: CondenseOptions): Promise<void> {
  const known = options.with === undefined ? null : readCondenser(options.with);
  if (known !== null) refuseShapeOptions(options);
  const times = {
    ...(options.start === undefined ? {} : { startMs: options.start }),
    ...(options.tick === undefined ? {} : { tickMs: options.tick }),
  };
  const sources = await Promise.all(options.frames.map((path) => openFrames(path, times)));
  const recording = joinRecordings(sources);
  if (known !== null) requireAlike(known, recording, options.with as string);
  const shape = known?.shape ?? shapeOf(options, recording);
  if (known === null) requireMemory(shape, options.rank);
  const everyMs = options.every ?? (shape.tickMs >= MIN_TICK_MS ? shape.tickMs : DEFAULT_EVERY_MS);
  if (everyMs < shape.tickMs)
    throw new TrainError('options', `--every: expected at least the ${shape.tickMs} ms between frames, got ${everyMs}`);
  const isNew = openFolder(options.out);
  try {
    const { condensePage } = await import('../wide/condense-page.ts');
    const reading = createProgress('reading', 'frames');
    const frames = await projectFrames(recording, shape, options.out, reading.update);
    reading.end();
    try {
      finish(options, known, shape, recording, frames, everyMs, condensePage);
    } finally {
      frames.close();
    }
  } catch (cause) {
    // A refusal leaves nothing behind, not even an empty folder.
    if (isNew && readdirSync(options.out).length === 0) rmdirSync(options.out);
    throw cause;
  }
}

function finish(
  options: CondenseOptions,
  known: Condenser | null,
  shape: CondenserShape,
  recording: Recording,
  frames: ProjectedFrames,
  everyMs: number,
  drawPage: (page: CondensePage) => string,
): void {
  const condenser = known ?? learn(options, shape, recording, frames);
  if (known !== null) frames.standardise(known.mean, known.record.scale);
  const condensing = createProgress('condensing', 'frames');
  const series = stateSeries(condenser, frames, everyMs, condensing.update);
  condensing.end();
  if (series.timesMs.length === 0)
    throw new TrainError(
      'history',
      `${recording.name}: expected at least ${shape.window} frames without a break, got ${frames.count}; give a longer recording`,
    );
  const score = scoreCondenser(condenser, frames, firstHeldOut(condenser, frames), frames.count);
  const bytes = encodeCondenser(condenser);
  const digest = createHash('sha256').update(bytes).digest('hex');
  const page = drawPage({
    condenser,
    digest,
    source: recording.name,
    frames: frames.count,
    isLearned: known === null,
    series,
    score,
  });
  writeOutputs([
    { path: join(options.out, 'states.csv'), bytes: statesCsv(series) },
    { path: join(options.out, 'report.html'), bytes: page },
    ...(known === null ? [{ path: join(options.out, 'condenser.swn'), bytes }] : []),
  ]);
  say(options, condenser, series, score, digest);
}

function learn(
  options: CondenseOptions,
  shape: CondenserShape,
  recording: Recording,
  frames: ProjectedFrames,
): Condenser {
  const learning = createProgress('learning', 'windows');
  const condenser = learnCondenser(frames, {
    shape,
    source: recording.name,
    rank: options.rank,
    order: options.order ?? null,
    mostStates: Math.min(MOST_STATES, options.rank),
    progress: learning.update,
  });
  learning.end();
  return condenser;
}

function say(
  options: CondenseOptions,
  condenser: Condenser,
  series: StateSeries,
  score: CondenseScore | null,
  digest: string,
): void {
  const { sentence, skill, hasSkill } = condenseVerdict(condenser, score);
  const states = join(options.out, 'states.csv');
  const own = options.with ?? join(options.out, 'condenser.swn');
  const facts = {
    states,
    condenser: own,
    digest,
    order: condenser.record.order,
    rows: series.timesMs.length,
    tick_ms: series.everyMs,
    has_skill: hasSkill,
    skill,
    discarded_share: condenser.record.discarded / condenser.record.energy,
    verdict: sentence,
    advisory: ADVISORY,
  };
  process.stdout.write(
    options.json
      ? `${JSON.stringify(facts)}\n`
      : `${sentence}\n${states}: ${series.timesMs.length} rows of ${condenser.record.order}; condenser ${own}; look at ${join(options.out, 'report.html')}\n` +
          `${ADVISORY}\n`,
  );
}

function shapeOf(options: CondenseOptions, { frameLength, tickMs }: Recording): CondenserShape {
  if ((options.order ?? 1) > options.rank)
    throw new TrainError('options', `--order: expected at most the ${options.rank} of --rank, got ${options.order}`);
  const numbers = Math.min(frameLength, options.projection ?? DEFAULT_NUMBERS);
  return {
    frameLength,
    tickMs,
    numbers,
    window: options.window ?? 16,
    horizon: options.horizon ?? 16,
    features: options.features ?? 0,
    seed: options.seed ?? 1,
  };
}

/** What a condenser already decides cannot be asked for beside it. */
function refuseShapeOptions(options: CondenseOptions): void {
  for (const name of ['window', 'horizon', 'order', 'projection', 'features', 'seed'] as const) {
    if (options[name] !== undefined)
      throw new TrainError('options', `--${name}: the condenser given with --with decides that; leave it out`);
  }
}

function requireAlike({ shape }: Condenser, { name, frameLength, tickMs }: Recording, path: string): void {
  const refuse = (expected: string, got: string): never => {
    throw new TrainError(
      'history',
      `${name}: expected ${expected}, as ${path} was made for, got ${got}; learn another condenser`,
    );
  };
  if (frameLength !== shape.frameLength) refuse(`frames of ${shape.frameLength} numbers`, `${frameLength}`);
  if (Math.abs(tickMs / shape.tickMs - 1) > 0.01) refuse(`a frame every ${shape.tickMs} ms`, `one every ${tickMs} ms`);
}

/** Said before anything is read. */
function requireMemory(shape: CondenserShape, rank: number): void {
  const needed = learningBytes(shape, rank);
  // A container's limit counts where there is one; without one it is 0 or larger than any machine.
  const limit = process.constrainedMemory() || Number.POSITIVE_INFINITY;
  const free = Math.max(0, Math.min(freemem(), limit - process.memoryUsage.rss(), MOST_BYTES));
  if (needed > free)
    throw new TrainError(
      'options',
      `Learning this takes ${bytesText(needed)} of memory, and ${bytesText(free)} can be had; ` +
        'give a smaller --window, --horizon, --projection, --features or --rank',
      { details: { needed } },
    );
}

/** Makes it where there is none; true then. */
function openFolder(path: string): boolean {
  if (path === '') throw new TrainError('file', '--out: expected a path, got an empty one');
  const isNew = !existsSync(path);
  try {
    makeFolder(path);
    return isNew;
  } catch (cause) {
    throw unwritable(path, cause as Error);
  }
}

function instant(text: string): number {
  const ms = parseInstant(text);
  if (ms === null) throw new InvalidArgumentError('Expected a time with a zone, such as 2026-03-01T06:00:00Z.');
  return ms;
}

function milliseconds(text: string): number {
  const value = Number(text);
  if (text.trim() === '' || !(value > 0 && Number.isFinite(value)))
    throw new InvalidArgumentError('Expected a number of milliseconds above 0.');
  return value;
}

function even(text: string): number {
  const value = wholeNumber(0, 1_000_000)(text);
  if (value % 2 !== 0) throw new InvalidArgumentError('Expected an even number.');
  return value;
}
