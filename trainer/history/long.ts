/**
 * A history of any length in bounded memory: a short one is loaded as ever; of a long one the newest part is, and what is
 * older streams past once, chunk by chunk, into whoever learns from it.
 */
import type { Site } from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import { channelsOf } from './channels.ts';
import { firstTimeOf } from './first-time.ts';
import type { History } from './history.ts';
import { type InputFile, inspectFile } from './input-file.ts';
import { type LoadedHistory, prepare } from './load.ts';
import { CHUNK_TICKS, LONG_FROM, RECENT_TICKS } from './long-limits.ts';
import { StreamMerge } from './merge.ts';
import { type OlderFacts, type OlderSink, OlderTicks } from './older.ts';
import { type ReadOptions, readShort, refuseUnseen } from './read.ts';
import { type LongLimits, RecentReadings } from './recent.ts';
import { TextStream } from './text-stream.ts';
import { TimeReader } from './times.ts';
import { checkZone } from './zone.ts';

export type { OlderFacts, OlderSink } from './older.ts';

/** How to read a history that may be long. */
export interface LongOptions extends ReadOptions {
  /** File that keeps the place where reading was interrupted; none when absent. */
  readonly resumeFile?: string;
  /** Where a history counts as long; LONG_FROM and its like when absent. */
  readonly limits?: LongLimits;
}

/** A history ready to learn from, whole where it is short, else its newest part. */
export interface LongHistory extends LoadedHistory {
  /** What streamed past before the newest part; null where there was nothing. */
  readonly older: OlderFacts | null;
  /** Takes away the file that keeps the place: call it once the result is written. */
  readonly done: () => void;
}

const LIMITS: LongLimits = { longFrom: LONG_FROM, recentTicks: RECENT_TICKS, chunkTicks: CHUNK_TICKS };

/**
 * Reads files, globs and folders; lays on ticks and surveys.
 *
 * sinkFor      makes the one who learns from what is older; asked only where the history is long, and again where reading
 *              has to begin anew
 * judgedShare  share of the newest part's ticks, at the end, that will judge
 * throws       TrainError 'file' or 'history' as `loadHistory`, and where readings of a long history are too far out of order
 */
export async function loadLong(
  paths: readonly string[],
  site: Site,
  options: LongOptions,
  sinkFor: () => OlderSink,
  judgedShare = 0,
): Promise<LongHistory> {
  if (paths.length === 0)
    throw new TrainError('options', 'history: expected at least one file, got none; name them after --history');
  if (options.zone !== null) checkZone(options.zone);
  const limits = options.limits ?? LIMITS;
  const short = await readShort(paths, site, options, limits.longFrom);
  if (short !== null) return { ...prepare(short, site, judgedShare), older: null, done: () => {} };
  return readLong(paths, site, options, limits, sinkFor(), judgedShare);
}

async function readLong(
  paths: readonly string[],
  site: Site,
  options: LongOptions,
  limits: LongLimits,
  sink: OlderSink,
  judgedShare: number,
): Promise<LongHistory> {
  const files = new Map(paths.map((path) => [path, inspectFile(path)]));
  const zone = options.zone ?? (options.requireZone ? null : site.timeZone);
  const span = {
    fromMs: options.fromMs ?? Number.NEGATIVE_INFINITY,
    untilMs: options.untilMs ?? Number.POSITIVE_INFINITY,
  };
  const waiting: { path: string; firstMs: number }[] = [];
  for (const path of paths)
    waiting.push({ path, firstMs: await firstTimeOf(files.get(path) as InputFile, site, zone) });
  waiting.sort((a, b) => a.firstMs - b.firstMs || paths.indexOf(a.path) - paths.indexOf(b.path));
  const times = new TimeReader(zone);
  const merge = new StreamMerge(
    waiting,
    (limits.chunkTicks / 4) * site.tickMs,
    (path, previous) =>
      new TextStream(files.get(path) as InputFile, site, span, new TimeReader(zone, times), {
        state: null,
        previous: previous?.gathering ?? null,
      }),
  );
  const recent = new RecentReadings(site.tickMs, limits);
  const older = new OlderTicks(site, sink);
  const totalBytes = [...files.values()].reduce((sum, { bytes }) => sum + bytes, 0);
  try {
    while (await merge.step(recent)) {
      older.handOn(recent, false);
      const { rows, bytes } = merge;
      options.progress?.update(rows, bytes > 0 ? Math.round((rows * totalBytes) / bytes) : null);
    }
  } finally {
    await merge.close();
    options.progress?.end();
  }
  refuseUnseen(site, (c) => recent.holds(c), merge.finished);
  older.handOn(recent, true);
  const fromMs = recent.cutTick * site.tickMs;
  const history: History = {
    channels: recent.channels(channelsOf(site).map(({ name }) => name)),
    signalCount: site.signals.length,
    files: merge.finished,
    zone: times.zone,
    clockChanges: times.changes.filter(({ atMs }) => atMs >= fromMs),
  };
  return {
    ...prepare(history, site, judgedShare),
    older: older.facts(merge.rows, merge.outOfOrder),
    done: () => {},
  };
}
