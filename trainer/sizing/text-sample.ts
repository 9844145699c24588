/**
 * The first and last lines of a text file, and how long it is once unpacked. Of a packed file there is no last line to be had
 * without unpacking it all; its length is what it says of itself, where that can be, else what its beginning comes to. Only
 * a Zstandard file that does not say its length is read through.
 */
import { closeSync, openSync, readSync } from 'node:fs';
import { constants, gunzipSync } from 'node:zlib';
import { TrainError } from '../errors.ts';
import { type InputFile, readBlocks } from '../history/input-file.ts';

/** Bytes looked at, at the beginning and at the end. */
const HEAD_BYTES = 1 << 20;
const TAIL_BYTES = 1 << 17;
/** Stored bytes of a packed file that are unpacked. */
const PACKED_BYTES = 1 << 18;
const NEWLINE = 10;

/** Pieces of a text file. */
export interface TextSample {
  /** Whole lines from the beginning. */
  readonly head: Buffer;
  /** The first line with its line break, for readers that need a header. */
  readonly firstLine: Buffer;
  /** Whole lines up to the end, none of the head's; null where they cannot be had, or the head is all. */
  readonly tail: Buffer | null;
  /** Length of the text. */
  readonly textBytes: number;
}

/**
 * Looks.
 *
 * throws  TrainError 'file' where the beginning cannot be unpacked, or holds no line
 */
export async function sampleText(input: InputFile): Promise<TextSample> {
  if (input.kind === 'zstd') return sampleZstandard(input);
  return input.kind === 'gzip' ? samplePacked(input) : samplePlain(input);
}

function samplePlain({ path, bytes }: InputFile): TextSample {
  const isWhole = bytes <= HEAD_BYTES + TAIL_BYTES;
  const head = withoutMark(readAt(path, 0, isWhole ? bytes : HEAD_BYTES));
  if (isWhole) return { head, firstLine: firstLineOf(path, head), tail: null, textBytes: head.length };
  const end = readAt(path, bytes - TAIL_BYTES, TAIL_BYTES);
  const whole = wholeLines(path, head);
  const tail = end.subarray(end.indexOf(NEWLINE) + 1);
  return { head: whole, firstLine: firstLineOf(path, whole), tail, textBytes: bytes };
}

function samplePacked({ path, bytes }: InputFile): TextSample {
  const stored = readAt(path, 0, Math.min(bytes, PACKED_BYTES));
  let text: Buffer;
  try {
    text = withoutMark(gunzipSync(stored, { finishFlush: constants.Z_SYNC_FLUSH }));
  } catch (cause) {
    throw new TrainError(
      'file',
      `${path}: expected a whole gzip file, got a damaged one (${(cause as Error).message}); copy or export it again`,
      { cause },
    );
  }
  if (stored.length === bytes)
    return { head: text, firstLine: firstLineOf(path, text), tail: null, textBytes: text.length };
  const guess = (text.length * bytes) / stored.length;
  const head = wholeLines(path, text);
  return { head, firstLine: firstLineOf(path, head), tail: null, textBytes: trailerLength(path, bytes, guess) };
}

async function sampleZstandard(input: InputFile): Promise<TextSample> {
  const { path, bytes } = input;
  const said = zstandardLength(path);
  const parts: Buffer[] = [];
  let held = 0;
  let length = 0;
  for await (const block of readBlocks(input, () => {})) {
    length += block.length;
    if (held < HEAD_BYTES) parts.push(block);
    held += block.length;
    // A length below that of the file is of its first part alone.
    if (said !== null && said > bytes && held >= HEAD_BYTES) break;
  }
  const head = Buffer.concat(parts);
  const textBytes = said !== null && said > bytes ? said : length;
  return { head, firstLine: firstLineOf(path, head), tail: null, textBytes: Math.max(textBytes, head.length) };
}

/** The length that a frame's header says (RFC 8878, section 3.1.1.1); null where it does not. */
function zstandardLength(path: string): number | null {
  const head = readAt(path, 0, 18);
  const descriptor = head[4];
  const isSingle = (descriptor & 32) !== 0;
  const flag = descriptor >> 6;
  const at = 5 + (isSingle ? 0 : 1) + ([0, 1, 2, 4][descriptor & 3] as number);
  if (flag === 0) return isSingle ? head[at] : null;
  if (flag === 1) return head.readUInt16LE(at) + 256;
  return flag === 2 ? head.readUInt32LE(at) : Number(head.readBigUInt64LE(at));
}

/** Members of a gzip file end in their length modulo 2^32 (RFC 1952, section 2.3.1); of several members it is the last one's. */
function trailerLength(path: string, bytes: number, guess: number): number {
  const said = readAt(path, bytes - 4, 4).readUInt32LE(0);
  const turns = Math.max(0, Math.round((guess - said) / 2 ** 32));
  const length = said + turns * 2 ** 32;
  return Math.abs(length - guess) <= 0.5 * guess ? length : Math.round(guess);
}

function readAt(path: string, from: number, length: number): Buffer {
  const buffer = Buffer.alloc(length);
  const descriptor = openSync(path, 'r');
  try {
    const read = readSync(descriptor, buffer, 0, length, from);
    return buffer.subarray(0, read);
  } finally {
    closeSync(descriptor);
  }
}

function withoutMark(text: Buffer): Buffer {
  return text[0] === 0xef && text[1] === 0xbb && text[2] === 0xbf ? text.subarray(3) : text;
}

function wholeLines(path: string, text: Buffer): Buffer {
  const end = text.lastIndexOf(NEWLINE) + 1;
  if (end === 0)
    throw new TrainError(
      'history',
      `${path}: expected lines of text, got none within its first ${text.length} bytes; check that this is the right file`,
    );
  return text.subarray(0, end);
}

function firstLineOf(path: string, text: Buffer): Buffer {
  const end = text.indexOf(NEWLINE) + 1;
  return end === 0 ? wholeLines(path, Buffer.concat([text, Buffer.of(NEWLINE)])) : text.subarray(0, end);
}
