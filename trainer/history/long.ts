/**
 * A history of any length in bounded memory: a short one is loaded as ever; of a long one the newest part is, and what is
 * older streams past once, chunk by chunk, into whoever learns from it.
 */
import { existsSync } from 'node:fs';
import { dirname } from 'node:path';
import type { Site } from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import type { Remembered } from '../exclusions.ts';
import { channelsOf } from './channels.ts';
import { ColumnsEngine } from './columns-engine.ts';
import { findFiles } from './find-files.ts';
import { iso } from './finding.ts';
import type { History } from './history.ts';
import type { Interrupt } from './interrupt.ts';
import { type LoadedHistory, prepare } from './load.ts';
import { CHUNK_TICKS, LONG_FROM, RECENT_TICKS } from './long-limits.ts';
import { LongReading } from './long-reading.ts';
import { LateReading } from './merge.ts';
import type { OlderFacts, OlderSink } from './older.ts';
import { type ReadOptions, readShort } from './read.ts';
import type { LongLimits } from './recent.ts';
import { type Belongs, digestOfPlain, forgetPlace, identityOf, type Place, readPlace } from './saved-place.ts';
import { SpanWatch } from './span-watch.ts';
import { checkZone } from './zone.ts';

export type { OlderFacts, OlderSink } from './older.ts';

/** How to read a history that may be long. */
export interface LongOptions extends ReadOptions {
  /** File that keeps the place of an interrupted reading; none when absent, and interrupts are then not looked for. */
  readonly resumeFile?: string;
  /** What else the sink goes by, such as a half-life: a place saved under another is of no use. */
  readonly sinkKey?: string;
  /** Folder where sorting may spill; that of `resumeFile`, else the system's temporary one, when absent. */
  readonly spillIn?: string;
  /** Told in a sentence when reading goes on from an earlier run, or why it cannot. */
  readonly say?: (sentence: string) => void;
  /** Where a history counts as long; LONG_FROM and its like when absent. */
  readonly limits?: LongLimits;
  /** Asked whether to stop; the signals of the process when absent. */
  readonly interrupt?: Interrupt;
  /** Time between two savings of the place, ms. */
  readonly saveEveryMs?: number;
}

/** A history ready to learn from, whole where it is short, else its newest part. */
export interface LongHistory extends LoadedHistory {
  /** What streamed past before the newest part; null where there was nothing. */
  readonly older: OlderFacts | null;
  /** Takes away the file that keeps the place: call it once the result is written. */
  readonly done: () => void;
}

const LIMITS: LongLimits = { longFrom: LONG_FROM, recentTicks: RECENT_TICKS, chunkTicks: CHUNK_TICKS };

/** A history as it was found: whole where it is short, else its newest part. */
export interface Newest {
  readonly history: History;
  readonly older: OlderFacts | null;
  /** What older readings say of the time that must not teach. */
  readonly remembered: readonly Remembered[];
}

/**
 * Reads files, folders and patterns; lays on ticks and surveys.
 *
 * sinkFor      makes the one who learns from what is older; asked only where the history is long, and again where reading
 *              has to begin anew
 * judgedShare  share of the newest part's ticks, at the end, that will judge
 * throws       as `readNewest`
 */
export async function loadLong(
  paths: readonly string[],
  site: Site,
  options: LongOptions,
  sinkFor: () => OlderSink,
  judgedShare = 0,
): Promise<LongHistory> {
  const { history, older, remembered } = await readNewest(paths, site, options, sinkFor);
  const done = (): void => {
    if (options.resumeFile !== undefined) forgetPlace(options.resumeFile);
  };
  return { ...prepare(history, site, judgedShare, remembered), older, done };
}

/** Lets pass what is older: for those who look at the newest part alone. */
export const LET_PASS: OlderSink = Object.freeze({
  take: () => {},
  snapshot: () => new Uint8Array(0),
  restore: () => {},
});

/**
 * Reads files, folders and patterns as they are found.
 *
 * sinkFor  as `loadLong`
 * throws   TrainError 'file' or 'history' as `readHistory`, and where readings of a long history are too far out of order;
 *          Interrupted where somebody asked to stop, the place saved
 */
export async function readNewest(
  paths: readonly string[],
  site: Site,
  options: LongOptions,
  sinkFor: () => OlderSink = () => LET_PASS,
): Promise<Newest> {
  if (paths.length === 0)
    throw new TrainError('options', 'history: expected at least one file, got none; name them after --history');
  if (options.zone !== null) checkZone(options.zone);
  const limits = options.limits ?? LIMITS;
  const { resumeFile } = options;
  const files = findFiles(paths, site.site);
  const isGoingOn = resumeFile !== undefined && existsSync(resumeFile);
  const engine = new ColumnsEngine(options.spillIn ?? (resumeFile === undefined ? undefined : dirname(resumeFile)));
  try {
    const watch = new SpanWatch(site.tickMs, limits.longFrom);
    const short = isGoingOn ? null : await readShort(files, site, options, watch, engine);
    if (short !== null) return { history: short, older: null, remembered: [] };
    return await readLong([...new Set(files)], site, { ...options, limits }, sinkFor, engine);
  } finally {
    engine.close();
  }
}

/** Values that commands which merely look at a history hold in memory: 128 MB. */
const HELD_VALUES = 16_000_000;

/** Limits for a command that learns nothing from what is older, and so holds as much as memory allows. */
export function lookLimits(site: Site): LongLimits {
  const longFrom = Math.max(LONG_FROM, Math.floor(HELD_VALUES / channelsOf(site).length));
  return { longFrom, recentTicks: longFrom - 2 * CHUNK_TICKS, chunkTicks: CHUNK_TICKS };
}

/** What a command that looks at the newest part alone says of the rest; null where there was none. */
export function olderNote(older: OlderFacts | null, tickMs: number): string | null {
  if (older === null) return null;
  const at = (tick: number): string => iso(tick * tickMs);
  return `This history is long: what is said here is of its newest part, from ${at(older.toTick)} on; ${older.ticks} ticks before that, from ${at(older.fromTick)}, were read past.`;
}

/** Reads in long mode; Parquet files whose rows turn out to lie too far out of order are sorted in another attempt. */
async function readLong(
  files: readonly string[],
  site: Site,
  options: LongOptions & { readonly limits: LongLimits },
  sinkFor: () => OlderSink,
  engine: ColumnsEngine,
): Promise<Newest> {
  const { resumeFile } = options;
  const belongs = resumeFile === undefined ? null : belongsOf(files, site, options);
  const place =
    resumeFile === undefined || belongs === null ? null : readPlace(resumeFile, belongs, options.say ?? (() => {}));
  const toSort = new Set<string>();
  for (let from = place; ; from = null) {
    const reading = new LongReading(files, site, { ...options, toSort, belongs }, sinkFor(), engine);
    try {
      if (!(await hasBegun(reading, from, options))) continue;
      await reading.through();
      return readOf(reading, site);
    } catch (cause) {
      if (!(cause instanceof LateReading) || !reading.canSort(cause.path)) throw cause;
      toSort.add(cause.path);
    } finally {
      await reading.close();
    }
  }
}

/** Begins a reading; false where a place turns out to be of no use, as after a change of the program. */
async function hasBegun(reading: LongReading, from: Place | null, { say, resumeFile }: LongOptions): Promise<boolean> {
  try {
    await reading.begin(from);
    return true;
  } catch (cause) {
    if (from === null) throw cause;
    say?.(`${resumeFile}: cannot be gone on from (${(cause as Error).message}), so reading starts anew.`);
    return false;
  }
}

function belongsOf(
  files: readonly string[],
  site: Site,
  { zone, requireZone, fromMs, untilMs, limits, sinkKey }: LongOptions,
): Belongs {
  const times = [zone, requireZone ?? false, fromMs ?? null, untilMs ?? null];
  const asked = digestOfPlain([site, times, limits, sinkKey ?? null]);
  return { asked, files: files.map(identityOf) };
}

function readOf(reading: LongReading, site: Site): Newest {
  const { recent, merge, times } = reading;
  const fromMs = recent.cutTick * site.tickMs;
  const history: History = {
    channels: recent.channels(channelsOf(site).map(({ name }) => name)),
    signalCount: site.signals.length,
    files: merge.finished,
    zone: times.zone,
    clockChanges: times.changes.filter(({ atMs }) => atMs >= fromMs),
  };
  const { older } = reading;
  return { history, older: older.facts(merge.rows, merge.outOfOrder), remembered: older.remembered };
}
