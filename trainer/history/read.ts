/**
 * Reads history files into typed arrays: finds each file's format from its first bytes and hands its blocks to the reader
 * of that format. Everything odd but readable is kept and counted for the survey; everything unreadable is refused with
 * file and line.
 */
import type { Site } from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import type { Progress } from '../progress.ts';
import { findSeparator } from './csv-header.ts';
import type { FileReader } from './file-reader.ts';
import { Gathering } from './gathering.ts';
import type { FileRead, History } from './history.ts';
import { type InputFile, inspectFile, readBlocks } from './input-file.ts';
import { TimeReader } from './times.ts';
import { WideCsvReader } from './wide-csv.ts';

export interface ReadOptions {
  /** Zone of times that carry none, before the site's own; null: the site's. */
  readonly zone: string | null;
  /** First time kept, ms; all when absent. */
  readonly fromMs?: number;
  /** First time not kept, ms; all when absent. */
  readonly untilMs?: number;
  readonly progress?: Progress;
}

/** Channels of a site in order: signals, then inputs. */
export function channelsOf(site: Site): Site['signals'] {
  return [...site.signals, ...site.inputs];
}

function readerFor(file: InputFile, head: Buffer, site: Site, gathering: Gathering, times: TimeReader): FileReader {
  const text = head.toString('utf8', 0, Math.min(head.length, 1 << 16));
  const wanted = channelsOf(site).map((channel) => channel.column);
  return new WideCsvReader(file.path, findSeparator(file.path, text), wanted, gathering, times);
}

async function readOne(
  file: InputFile,
  site: Site,
  gathering: Gathering,
  times: TimeReader,
  onBytes: (done: number, rows: number) => void,
): Promise<FileRead> {
  times.nextFile();
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
    reader ??= readerFor(file, next.value, site, gathering, times);
    reader.push(next.value);
  }
}

/**
 * Reads the files in the order given, as one history.
 *
 * throws  TrainError 'file' or 'history', with file, line and column, at the first thing that cannot be read
 */
export async function readHistory(files: readonly string[], site: Site, options: ReadOptions): Promise<History> {
  if (files.length === 0)
    throw new TrainError('options', 'history: expected at least one file, got none; name them after --history');
  const inputs = files.map(inspectFile);
  const totalBytes = inputs.reduce((sum, input) => sum + input.bytes, 0);
  const channels = channelsOf(site);
  const gathering = new Gathering(channels.length, {
    fromMs: options.fromMs ?? Number.NEGATIVE_INFINITY,
    untilMs: options.untilMs ?? Number.POSITIVE_INFINITY,
  });
  const times = new TimeReader(options.zone ?? site.timeZone);
  const read: FileRead[] = [];
  let bytesBefore = 0;
  let rowsBefore = 0;
  try {
    for (const input of inputs) {
      const before = bytesBefore;
      read.push(
        await readOne(input, site, gathering, times, (done, rows) => {
          const bytes = before + done;
          const rowsDone = rowsBefore + rows;
          options.progress?.update(rowsDone, bytes > 0 ? Math.round((rowsDone * totalBytes) / bytes) : null);
        }),
      );
      bytesBefore += input.bytes;
      rowsBefore += read.at(-1)?.rows ?? 0;
    }
  } finally {
    options.progress?.end();
  }
  return {
    channels: gathering.channels(channels.map((channel) => channel.name)),
    signalCount: site.signals.length,
    files: read,
    zone: times.zone,
    clockChanges: times.changes,
  };
}
