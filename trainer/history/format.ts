/**
 * Which reader a file needs, told from its first lines, never from its name.
 */
import type { Site } from '@stillwell/protocol';
import { CaptureReader } from './capture.ts';
import { channelsOf } from './channels.ts';
import { findSeparator, longColumns, readHeader } from './csv-header.ts';
import type { FileReader } from './file-reader.ts';
import type { Gathering } from './gathering.ts';
import type { FileRead } from './history.ts';
import { LongCsvReader } from './long-csv.ts';
import { LongNdjsonReader } from './long-ndjson.ts';
import { LineObjects } from './ndjson.ts';
import { RecordScanner } from './records.ts';
import { refusal } from './refusal.ts';
import type { TimeReader } from './times.ts';
import { WideCsvReader } from './wide-csv.ts';

const HEAD_BYTES = 1 << 16;

/** A file's format and, for CSV, its separator and the names in its header. */
export interface Format {
  readonly kind: FileRead['format'];
  readonly separator: string;
  readonly header: readonly string[];
}

/** First lines of a block, whole ones where there are several. */
function headOf(block: Buffer): Buffer {
  if (block.length <= HEAD_BYTES) return block;
  const end = block.lastIndexOf(10, HEAD_BYTES) + 1;
  return end > 0 ? block.subarray(0, end) : block;
}

function jsonKind(path: string, head: Buffer): FileRead['format'] {
  let kind: FileRead['format'] = 'long NDJSON';
  let isFound = false;
  new LineObjects(path, (line) => {
    if (!isFound && 'topic' in line) kind = 'MQTT capture';
    isFound = true;
  }).push(head);
  return kind;
}

/**
 * Tells the format from a file's first block.
 *
 * throws  TrainError 'history' where it is none of ours, with what was expected
 */
export function findFormat(path: string, block: Buffer): Format {
  const head = headOf(block);
  const text = head.toString('utf8');
  const first = text.trimStart()[0];
  if (first === undefined)
    throw refusal({ file: path }, 'a header line and readings', 'blank lines alone', 'export the file again');
  if (first === '{') return { kind: jsonKind(path, head), separator: '', header: [] };
  if (first === '[')
    throw refusal(
      { file: path, line: 1 },
      'CSV or one JSON object a line',
      'a JSON list',
      'write each object of the list on a line of its own',
    );
  const separator = findSeparator(path, text);
  const header: string[] = [];
  const scanner = new RecordScanner(path, separator, 1, (record) => {
    if (header.length === 0) header.push(...readHeader(path, record));
  });
  scanner.push(head);
  scanner.end();
  return { kind: longColumns(header) === null ? 'wide CSV' : 'long CSV', separator, header };
}

/** The reader of a file whose first block is given. */
export function readerFor(
  path: string,
  block: Buffer,
  site: Site,
  gathering: Gathering,
  times: TimeReader,
): FileReader {
  return readerOf(findFormat(path, block), path, site, gathering, times);
}

/** The reader of a file whose format is known. */
export function readerOf(
  { kind, separator }: Format,
  path: string,
  site: Site,
  gathering: Gathering,
  times: TimeReader,
): FileReader {
  const channels = channelsOf(site);
  const columns = channels.map((channel) => channel.column);
  const channelOf = new Map(columns.map((column, c) => [column, c]));
  if (kind === 'MQTT capture') return new CaptureReader(path, channels, gathering, times);
  if (kind === 'long NDJSON') return new LongNdjsonReader(path, channelOf, gathering, times);
  if (kind === 'long CSV') return new LongCsvReader(path, separator, channelOf, gathering, times);
  return new WideCsvReader(path, separator, columns, gathering, times);
}
