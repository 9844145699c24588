/**
 * Text files as blocks of whole lines, checked before anything reads them: there, a file, not empty, UTF-8, no NUL bytes.
 * Files packed with gzip or Zstandard are unpacked on the way. The SHA-256 is of the file as stored.
 *
 * Read by our own scan, since a refusal must name line, column and what to do, quoted line breaks counted; the columnar
 * library at hand reports a rejected line only after its own guess at types, and costs 100 ms before the first byte.
 */
import { isUtf8 } from 'node:buffer';
import { createHash } from 'node:crypto';
import { closeSync, createReadStream, fstatSync, openSync, readSync } from 'node:fs';
import type { Readable } from 'node:stream';
import { createGunzip } from 'node:zlib';
import { TrainError } from '../errors.ts';
import { digestOfFile } from './file-digest.ts';
import { refusal, unreadable } from './refusal.ts';
import { unpackedLines } from './zstd.ts';

const BLOCK_BYTES = 1 << 20;
/** No logger writes longer lines; a binary file often has none at all. */
const MAX_LINE_BYTES = 1 << 20;
const NEWLINE = 10;
const WANTED = 'a history file';

/** What is known of a file before it is read. */
export interface InputFile {
  readonly path: string;
  readonly bytes: number;
  /** Told from the first bytes, never from the name. */
  readonly kind: 'text' | 'gzip' | 'zstd' | 'Parquet';
}

/** What reading it through told. */
export interface FileDigest {
  readonly sha256: string;
}

/**
 * Looks at a file without reading it through.
 *
 * throws  TrainError 'file' where it is missing, a folder, unreadable or empty; 'history' where it is in another encoding
 */
export function inspectFile(path: string): InputFile {
  const head = Buffer.alloc(4);
  let bytes: number;
  try {
    const descriptor = openSync(path, 'r');
    try {
      const status = fstatSync(descriptor);
      if (status.isDirectory())
        throw new TrainError('file', `${path}: expected a history file, got a folder; name the files in it`);
      bytes = status.size;
      readSync(descriptor, head, 0, 4, 0);
    } finally {
      closeSync(descriptor);
    }
  } catch (cause) {
    if (cause instanceof TrainError) throw cause;
    throw unreadable(path, WANTED, cause);
  }
  if (bytes === 0)
    throw new TrainError('file', `${path}: expected a header line and readings, got an empty file; export it again`);
  if ((head[0] === 0xff && head[1] === 0xfe) || (head[0] === 0xfe && head[1] === 0xff))
    throw refusal({ file: path }, 'UTF-8 text', 'UTF-16 text', 'save or convert the file as UTF-8');
  return { path, bytes, kind: kindOf(head) };
}

/** RFC 1952 section 2.3.1, RFC 8878 section 3.1.1, and the magic of the Parquet format. */
function kindOf(head: Buffer): InputFile['kind'] {
  if (head[0] === 0x1f && head[1] === 0x8b) return 'gzip';
  if (head.readUInt32LE(0) === 0xfd2fb528) return 'zstd';
  return head.toString('latin1') === 'PAR1' ? 'Parquet' : 'text';
}

/** Refuses a block that is not UTF-8 text, naming the line. */
function checkText(path: string, block: Buffer, firstLine: number): void {
  const nul = block.indexOf(0);
  if (nul < 0 && isUtf8(block)) return;
  let line = firstLine;
  for (let from = 0; from < block.length; line++) {
    const newline = block.indexOf(NEWLINE, from);
    const end = newline < 0 ? block.length : newline + 1;
    const part = block.subarray(from, end);
    if (part.includes(0))
      throw refusal(
        { file: path, line },
        'text',
        'a NUL byte',
        'this is no text file, or a damaged one: export it again',
      );
    if (!isUtf8(part))
      throw refusal(
        { file: path, line },
        'UTF-8 text',
        'bytes that are not UTF-8',
        'convert the file first, for instance from Latin-1 or Windows-1252, or export it as UTF-8',
      );
    from = end;
  }
}

/** Counts the line breaks of a block. */
function countLines(block: Uint8Array): number {
  let count = 0;
  for (let at = block.indexOf(NEWLINE); at >= 0; at = block.indexOf(NEWLINE, at + 1)) count++;
  return count;
}

/** Where the text comes from, and the digest of the file as stored once all of it came. */
interface Source {
  readonly source: AsyncIterable<Buffer>;
  readonly digest: () => Promise<string>;
  readonly close: () => void;
}

function storedSource(file: InputFile, blockBytes: number, onBytes: (done: number) => void): Source {
  const hash = createHash('sha256');
  let done = 0;
  const stored = createReadStream(file.path, { highWaterMark: blockBytes });
  stored.on('data', (chunk) => {
    hash.update(chunk);
    done += chunk.length;
    onBytes(done);
  });
  let source: Readable = stored;
  if (file.kind === 'gzip') {
    const unpacked = createGunzip({ chunkSize: blockBytes });
    stored.on('error', (cause) => unpacked.destroy(cause));
    source = stored.pipe(unpacked);
  }
  return { source, digest: async () => hash.digest('hex'), close: () => stored.destroy() };
}

/** Packed in a way that the platform cannot unpack: nobody can say how far it is. */
function packedSource({ path }: InputFile): Source {
  return { source: unpackedLines(path), digest: () => digestOfFile(path), close: () => {} };
}

/**
 * Yields the file as blocks that end with a line break (the last one may not), a byte order mark taken off.
 *
 * onBytes  told the stored bytes read so far
 * options  blockBytes: stored bytes read at once; fromByte: bytes of text that an earlier run took already, which are
 *          passed over (but hashed again, so that the digest is of the whole file)
 * returns  the digest, once all blocks were taken
 * throws   TrainError 'file' or 'history' with file and line
 */
export async function* readBlocks(
  file: InputFile,
  onBytes: (done: number) => void,
  { blockBytes = BLOCK_BYTES, fromByte = 0 }: { blockBytes?: number; fromByte?: number } = {},
): AsyncGenerator<Buffer, FileDigest> {
  const { source, digest, close } = file.kind === 'zstd' ? packedSource(file) : storedSource(file, blockBytes, onBytes);
  let rest: Buffer = Buffer.alloc(0);
  let line = 1;
  let isFirst = true;
  let toSkip = fromByte;
  try {
    for await (const chunk of source) {
      let block: Buffer = rest.length > 0 ? Buffer.concat([rest, chunk]) : chunk;
      if (isFirst && block.length >= 3) {
        if (block[0] === 0xef && block[1] === 0xbb && block[2] === 0xbf) block = block.subarray(3);
        isFirst = false;
      }
      const end = block.lastIndexOf(NEWLINE) + 1;
      rest = block.subarray(end);
      if (rest.length > MAX_LINE_BYTES) {
        checkText(file.path, rest, line);
        throw refusal(
          { file: file.path, line },
          'lines of text',
          `a line of more than ${MAX_LINE_BYTES} bytes`,
          'check that this is the right file',
        );
      }
      if (end === 0) continue;
      let whole = block.subarray(0, end);
      if (toSkip > 0) {
        const taken = Math.min(toSkip, whole.length);
        line += countLines(whole.subarray(0, taken));
        toSkip -= taken;
        whole = whole.subarray(taken);
        if (whole.length === 0) continue;
      }
      checkText(file.path, whole, line);
      line += countLines(whole);
      yield whole;
    }
  } catch (cause) {
    if (cause instanceof TrainError) throw cause;
    if (String((cause as NodeJS.ErrnoException).code).startsWith('Z_'))
      throw refusal(
        { file: file.path },
        'a whole gzip file',
        `a damaged one (${(cause as Error).message})`,
        'copy or export it again',
        { cause },
      );
    throw unreadable(file.path, WANTED, cause);
  } finally {
    close();
  }
  if (rest.length > toSkip) {
    checkText(file.path, rest, line);
    yield rest.subarray(toSkip);
  }
  return { sha256: await digest() };
}
