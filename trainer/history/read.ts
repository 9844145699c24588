/**
 * Reads history files into typed arrays: finds each file's format from its first bytes and hands its blocks to the reader
 * of that format. Everything odd but readable is kept and counted for the survey; everything unreadable is refused with
 * file and line.
 */
import type { Site } from '@stillwell/protocol';
import { nearestName } from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import type { Progress } from '../progress.ts';
import { channelsOf } from './channels.ts';
import { ColumnStream } from './column-stream.ts';
import { ColumnsEngine } from './columns-engine.ts';
import type { FileReader } from './file-reader.ts';
import { findFiles } from './find-files.ts';
import { readerFor } from './format.ts';
import { Gathering } from './gathering.ts';
import type { FileRead, History } from './history.ts';
import { type InputFile, inspectFile, readBlocks } from './input-file.ts';
import { refusal, shown } from './refusal.ts';
import type { Watch } from './span-watch.ts';
import { TimeReader } from './times.ts';
import { checkZone } from './zone.ts';

/** How to read a history. */
export interface ReadOptions {
  /** Zone of times that carry none, before the site's own; null: the site's. */
  readonly zone: string | null;
  /** Refuses times without a zone when `zone` is null, whatever the site says: for a site that is only a draft. */
  readonly requireZone?: boolean;
  /** First time kept, ms; all when absent. */
  readonly fromMs?: number;
  /** First time not kept, ms; all when absent. */
  readonly untilMs?: number;
  readonly progress?: Progress;
}

/** A history holds more ticks than its reader was to take. */
class TooLong extends Error {}

async function readOne(
  file: InputFile,
  site: Site,
  gathering: Gathering,
  times: TimeReader,
  onBytes: (done: number, rows: number) => void,
  watch: Watch | null,
  engine: ColumnsEngine,
): Promise<FileRead> {
  times.nextFile();
  if (file.kind === 'Parquet') {
    const stream = new ColumnStream(file, site, gathering, times, engine, { state: null, previous: null });
    while (await stream.more()) {
      onBytes(stream.bytesDone, stream.rows);
      if (!watch?.isPassed(gathering, stream.share)) continue;
      await stream.close();
      throw new TooLong();
    }
    return stream.account;
  }
  let reader: FileReader | null = null;
  const blocks = readBlocks(file, (done) => onBytes(done, reader?.rows ?? 0));
  for (;;) {
    const next = await blocks.next();
    if (next.done) {
      if (reader === null)
        throw new TrainError(
          'file',
          `${file.path}: expected a header line and readings, got blank bytes; export it again`,
        );
      return {
        file: file.path,
        bytes: file.bytes,
        sha256: next.value.sha256,
        ...(reader as FileReader).end(),
        timeKind: times.kind,
      };
    }
    reader ??= readerFor(file.path, next.value, site, gathering, times);
    reader.push(next.value);
    if (watch?.isPassed(gathering)) {
      await blocks.return({ sha256: '' });
      throw new TooLong();
    }
  }
}

/** Refuses a signal that no file holds, with the likeliest column it was meant to be. */
export function refuseUnseen(site: Site, holds: (channel: number) => boolean, files: readonly FileRead[]): void {
  const unseen = channelsOf(site).find((_, c) => !holds(c));
  if (unseen === undefined) return;
  const others = [...new Set(files.flatMap(({ columnsIgnored }) => columnsIgnored))];
  const isCapture = files.every(({ format }) => format === 'MQTT capture');
  const near = nearestName(unseen.column, others);
  const place = { file: files.map(({ file }) => file).join(', ') };
  if (isCapture)
    throw refusal(
      place,
      `messages for ${shown(unseen.name)} on topics that match ${shown(unseen.topic ?? '')}`,
      others.length > 0 ? `messages on ${listed(others)}` : 'none that could be read',
      'mend "topic" or "payload" of that signal in the site file',
    );
  throw refusal(
    place,
    `a column or signal ${shown(unseen.column)}, as the site file says`,
    others.length > 0 ? `beside the known ones ${listed(others)}` : 'none beside the known ones',
    near === null
      ? `set "column" of ${shown(unseen.name)} in the site file`
      : `perhaps ${shown(near)} is meant: set "column" of ${shown(unseen.name)} to it`,
  );
}

function listed(names: readonly string[]): string {
  const few = names.slice(0, 12).map(shown).join(', ');
  return names.length > 12 ? `${few} and ${names.length - 12} more` : few;
}

/**
 * Reads files, folders and patterns in the order given, as one history.
 *
 * throws  TrainError 'file' or 'history', with file, line and column, at the first thing that cannot be read
 */
export async function readHistory(files: readonly string[], site: Site, options: ReadOptions): Promise<History> {
  const engine = new ColumnsEngine();
  try {
    return await readWatched(files, site, options, null, engine);
  } finally {
    engine.close();
  }
}

/**
 * As `readHistory`, but null as soon as `watch` says that the history is too long to be held.
 *
 * throws  as `readHistory`
 */
export async function readShort(
  files: readonly string[],
  site: Site,
  options: ReadOptions,
  watch: Watch,
  engine: ColumnsEngine,
): Promise<History | null> {
  try {
    return await readWatched(files, site, options, watch, engine);
  } catch (cause) {
    if (cause instanceof TooLong) return null;
    throw cause;
  }
}

async function readWatched(
  paths: readonly string[],
  site: Site,
  options: ReadOptions,
  watch: Watch | null,
  engine: ColumnsEngine,
): Promise<History> {
  if (paths.length === 0)
    throw new TrainError('options', 'history: expected at least one file, got none; name them after --history');
  if (options.zone !== null) checkZone(options.zone);
  const inputs = findFiles(paths, site.site).map(inspectFile);
  const totalBytes = inputs.reduce((sum, input) => sum + input.bytes, 0);
  const channels = channelsOf(site);
  const gathering = new Gathering(channels.length, {
    fromMs: options.fromMs ?? Number.NEGATIVE_INFINITY,
    untilMs: options.untilMs ?? Number.POSITIVE_INFINITY,
  });
  const times = new TimeReader(options.zone ?? (options.requireZone ? null : site.timeZone));
  const read: FileRead[] = [];
  let bytesBefore = 0;
  let rowsBefore = 0;
  try {
    for (const input of inputs) {
      const before = bytesBefore;
      read.push(
        await readOne(
          input,
          site,
          gathering,
          times,
          (done, rows) => {
            const bytes = before + done;
            const rowsDone = rowsBefore + rows;
            options.progress?.update(rowsDone, bytes > 0 ? Math.round((rowsDone * totalBytes) / bytes) : null);
          },
          watch,
          engine,
        ),
      );
      bytesBefore += input.bytes;
      rowsBefore += read.at(-1)?.rows ?? 0;
    }
  } finally {
    options.progress?.end();
  }
  refuseUnseen(site, (c) => gathering.holds(c), read);
  return {
    channels: gathering.channels(channels.map((channel) => channel.name)),
    signalCount: site.signals.length,
    files: read,
    zone: times.zone,
    clockChanges: times.changes,
  };
}
