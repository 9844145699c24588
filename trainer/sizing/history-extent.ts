/**
 * How long a history is, without reading it through: from the size of each file, what its first and last lines hold and, for
 * Parquet, what the file says of itself.
 */
import type { Site } from '@stillwell/protocol';
import type { FileReader } from '../history/file-reader.ts';
import { findFiles } from '../history/find-files.ts';
import { readerFor } from '../history/format.ts';
import { Gathering } from '../history/gathering.ts';
import { type InputFile, inspectFile } from '../history/input-file.ts';
import { TimeReader } from '../history/times.ts';
import type { TimeSpan } from '../time-option.ts';
import { parquetExtent } from './parquet-extent.ts';
import { sampleText } from './text-sample.ts';

/** What a history comes to, or is estimated to. */
export interface Extent {
  readonly files: number;
  /** As stored. */
  readonly bytes: number;
  /** Of text once unpacked; 0 for Parquet, which is not text. */
  readonly textBytes: number;
  readonly rows: number;
  /** Readings of the site's channels. */
  readonly readings: number;
  /** From the first reading to the last, both included. */
  readonly ticks: number;
  /** Channels whose readings were seen. */
  readonly fromMs: number;
  readonly toMs: number;
  /** True where every file was seen whole. */
  readonly isExact: boolean;
}

/** One file's share of it; times infinite where no reading of the site was seen. */
export interface FileExtent {
  readonly textBytes: number;
  readonly rows: number;
  readonly readings: number;
  readonly fromMs: number;
  readonly toMs: number;
  readonly isExact: boolean;
}

/**
 * Estimates. Files, folders and patterns are found as `fit` finds them.
 *
 * zone    of times that carry none
 * throws  TrainError 'file' or 'history' where a file cannot be read, as reading it would
 */
export async function historyExtent(
  paths: readonly string[],
  site: Site,
  zone: string | null,
  span: TimeSpan,
): Promise<Extent> {
  const inputs = findFiles(paths, site.site).map(inspectFile);
  const parts: FileExtent[] = [];
  for (const input of inputs)
    parts.push(input.kind === 'Parquet' ? await parquetExtent(input, site, zone) : await textExtent(input, site, zone));
  const kept = parts.map((part) => within(part, span));
  const fromMs = Math.min(...kept.map((part) => part.fromMs));
  const toMs = Math.max(...kept.map((part) => part.toMs));
  const sum = (of: (part: FileExtent) => number): number => kept.reduce((total, part) => total + of(part), 0);
  return {
    files: inputs.length,
    bytes: inputs.reduce((total, { bytes }) => total + bytes, 0),
    textBytes: parts.reduce((total, { textBytes }) => total + textBytes, 0),
    rows: Math.round(sum(({ rows }) => rows)),
    readings: Math.round(sum(({ readings }) => readings)),
    ticks: fromMs <= toMs ? Math.floor(toMs / site.tickMs) - Math.floor(fromMs / site.tickMs) + 1 : 0,
    fromMs,
    toMs,
    isExact: kept.every((part) => part.isExact),
  };
}

/** A file's part between --from and --until, as if its rows came evenly. */
function within(part: FileExtent, { fromMs = Number.NEGATIVE_INFINITY, untilMs = Number.POSITIVE_INFINITY }: TimeSpan) {
  const from = Math.max(part.fromMs, fromMs);
  const to = Math.min(part.toMs, untilMs);
  if (from === part.fromMs && to === part.toMs) return part;
  if (!(from < to)) return { ...part, rows: 0, readings: 0, fromMs: Infinity, toMs: -Infinity };
  const share = (to - from) / Math.max(1, part.toMs - part.fromMs);
  return {
    ...part,
    rows: part.rows * share,
    readings: part.readings * share,
    fromMs: from,
    toMs: to,
    isExact: false,
  };
}

async function textExtent(input: InputFile, site: Site, zone: string | null): Promise<FileExtent> {
  const sample = await sampleText(input);
  const head = looked(input.path, [sample.head], site, zone);
  if (sample.tail === null && sample.textBytes === sample.head.length)
    return { ...head, textBytes: sample.textBytes, isExact: true };
  const tail = sample.tail === null ? null : looked(input.path, [sample.firstLine, sample.tail], site, zone);
  const seenBytes = sample.head.length + (sample.tail?.length ?? 0);
  const seenRows = head.rows + (tail?.rows ?? 0);
  const rows = (sample.textBytes * seenRows) / seenBytes;
  const readings = (rows * (head.readings + (tail?.readings ?? 0))) / Math.max(1, seenRows);
  // Without an end to look at, the file goes on as it began.
  const toMs = tail?.toMs ?? head.fromMs + (head.toMs - head.fromMs) * (rows / Math.max(1, head.rows));
  return { textBytes: sample.textBytes, rows, readings, fromMs: head.fromMs, toMs, isExact: false };
}

/** What lines of a file hold. */
function looked(path: string, blocks: readonly Buffer[], site: Site, zone: string | null) {
  const all = { fromMs: Number.NEGATIVE_INFINITY, untilMs: Number.POSITIVE_INFINITY };
  const gathering = new Gathering(site.signals.length + site.inputs.length, all);
  const text = Buffer.concat(blocks);
  const reader: FileReader = readerFor(path, text, site, gathering, new TimeReader(zone));
  reader.push(text);
  const names = [...site.signals, ...site.inputs].map(({ name }) => name);
  let fromMs = Number.POSITIVE_INFINITY;
  let toMs = Number.NEGATIVE_INFINITY;
  let readings = 0;
  for (const { times, values } of gathering.channels(names)) {
    for (const time of times) {
      if (time < fromMs) fromMs = time;
      if (time > toMs) toMs = time;
    }
    for (const value of values) if (!Number.isNaN(value)) readings++;
  }
  return { rows: reader.rows, readings, fromMs, toMs };
}
