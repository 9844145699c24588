/**
 * Text packed with Zstandard (RFC 8878), which the platform cannot unpack: the columnar library reads it as raw lines, and
 * our own scan goes on from there, so that refusals are the same. That library takes a file that was cut off for a whole
 * one, so the frames are first gone through by their headers alone.
 */
import { closeSync, fstatSync, openSync, readSync } from 'node:fs';
import { TrainError } from '../errors.ts';
import { ColumnsEngine, chunksOf, quoted, quotedPath } from './columns-engine.ts';
import { refusal } from './refusal.ts';

const FRAME = 0xfd2fb528;
const SKIPPABLE = 0x184d2a50;
/** No logger writes longer lines; as for plain text. */
const MAX_LINE_BYTES = 1 << 20;
/** A line that is none, after the last: without it the answer ended too early. */
const END = '\u0001end';

/** Goes over the frames of a file (RFC 8878 section 3.1); true where the last one ends with the file. */
function isWhole(path: string): boolean {
  const descriptor = openSync(path, 'r');
  try {
    const { size } = fstatSync(descriptor);
    const bytes = Buffer.alloc(18);
    const read = (at: number): boolean => {
      bytes.fill(0);
      return readSync(descriptor, bytes, 0, bytes.length, at) > 0;
    };
    let at = 0;
    while (at < size && read(at)) {
      const magic = bytes.readUInt32LE(0);
      if (magic - (magic % 16) === SKIPPABLE) at += 8 + bytes.readUInt32LE(4);
      else if (magic === FRAME) at = afterFrame(at, bytes, read);
      else return false;
    }
    return at === size;
  } finally {
    closeSync(descriptor);
  }
}

/** Place after a frame whose first bytes are given; `read` fills the same bytes from elsewhere. */
function afterFrame(from: number, bytes: Buffer, read: (at: number) => boolean): number {
  const descriptor = bytes[4] as number;
  const isSingle = (descriptor & 32) !== 0;
  const sizes = [isSingle ? 1 : 0, 2, 4, 8];
  const head = 5 + (isSingle ? 0 : 1) + ([0, 1, 2, 4][descriptor & 3] as number) + (sizes[descriptor >> 6] as number);
  let at = from + head;
  for (let isLast = false; !isLast; ) {
    if (!read(at)) return Number.POSITIVE_INFINITY;
    const block = bytes.readUIntLE(0, 3);
    isLast = (block & 1) === 1;
    at += 3 + ((block & 6) === 2 ? 1 : block >> 3);
  }
  return at + ((descriptor & 4) === 0 ? 0 : 4);
}

function damaged(path: string, cause?: unknown): TrainError {
  return refusal(
    { file: path },
    'a whole Zstandard file',
    'a damaged or cut-off one',
    'copy or export it again',
    cause === undefined ? {} : { cause },
  );
}

/**
 * The text of a file in blocks of whole lines.
 *
 * throws  TrainError 'history' where it is cut off or damaged, or no text
 */
export async function* unpackedLines(path: string): AsyncGenerator<Buffer> {
  if (!isWhole(path)) throw damaged(path);
  const engine = new ColumnsEngine();
  const question =
    `SELECT line FROM read_csv(${quotedPath(path)}, auto_detect = false, header = false, columns = {'line': 'VARCHAR'}, ` +
    `delim = '', quote = '', escape = '', compression = 'zstd', strict_mode = false, parallel = false, max_line_size = ${MAX_LINE_BYTES}, ` +
    `buffer_size = ${2 * MAX_LINE_BYTES}) UNION ALL SELECT ${quoted(END)}`;
  try {
    const connection = await engine.connect();
    let last = '';
    for await (const chunk of chunksOf(connection, path, question)) {
      const lines = chunk.getColumnValues(0) as string[];
      last = lines.at(-1) as string;
      if (last === END) lines.pop();
      if (lines.length > 0) yield Buffer.from(`${lines.join('\n')}\n`);
    }
    if (last !== END) throw damaged(path);
  } catch (cause) {
    throw cause instanceof TrainError ? unpackRefusal(path, cause) : cause;
  } finally {
    engine.close();
  }
}

/** The library's word on a text in ours. */
function unpackRefusal(path: string, refused: TrainError): TrainError {
  const text = (refused.cause as Error | undefined)?.message ?? '';
  if (/unicode|utf-?8/i.test(text))
    return refusal(
      { file: path },
      'UTF-8 text',
      'bytes that are not UTF-8',
      'convert the file first, for instance from Latin-1 or Windows-1252, or export it as UTF-8',
      { cause: refused },
    );
  if (/Maximum line size/i.test(text))
    return refusal(
      { file: path },
      'lines of text',
      `a line of more than ${MAX_LINE_BYTES} bytes`,
      'check that this is the right file',
      { cause: refused },
    );
  return refused.cause === undefined ? refused : damaged(path, refused);
}
