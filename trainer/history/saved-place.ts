/**
 * The file that keeps the place of an interrupted reading: plain data as JSON and lists of numbers as they lie in memory.
 * It is good for the same files, site and options only, and for the same version of this program.
 *
 * | bytes | what |
 * | --- | --- |
 * | 8 | "SWPLACE" and the version, a byte |
 * | 4 | length of the JSON text, little-endian |
 * | … | JSON: what it belongs to, the plain data, and the length in bytes of every list |
 * | … | the lists, one after another |
 * | 32 | SHA-256 of all before it |
 */
import { createHash } from 'node:crypto';
import { closeSync, existsSync, openSync, readFileSync, readSync, rmSync, statSync } from 'node:fs';
import { writeOutput } from '../output-file.ts';

const MAGIC = Buffer.from('SWPLACE\u0001', 'latin1');
const DIGEST_BYTES = 32;
/** Bytes of a file's beginning and end that tell whether it is still the same. */
const EDGE_BYTES = 4096;

/** What a place belongs to: any difference, and it is of no use. */
export interface Belongs {
  /** Digest of site, options and limits. */
  readonly asked: string;
  readonly files: readonly FileIdentity[];
}

/** What tells a file from a changed one without reading it. */
export interface FileIdentity {
  readonly path: string;
  readonly bytes: number;
  readonly changedMs: number;
  /** Digest of its first and last bytes. */
  readonly edges: string;
}

/** A place: plain data, and the lists that it names by number. */
export interface Place {
  readonly data: unknown;
  readonly lists: readonly Uint8Array[];
}

/** Looks at a file's size, time and edges. */
export function identityOf(path: string): FileIdentity {
  const { size, mtimeMs } = statSync(path);
  const head = Buffer.alloc(Math.min(EDGE_BYTES, size));
  const tail = Buffer.alloc(Math.min(EDGE_BYTES, size));
  const descriptor = openSync(path, 'r');
  try {
    readSync(descriptor, head, 0, head.length, 0);
    readSync(descriptor, tail, 0, tail.length, size - tail.length);
  } finally {
    closeSync(descriptor);
  }
  const edges = createHash('sha256').update(head).update(tail).digest('hex');
  return { path, bytes: size, changedMs: mtimeMs, edges };
}

/** Digest of plain data. */
export function digestOfPlain(value: unknown): string {
  return createHash('sha256').update(JSON.stringify(value)).digest('hex');
}

/**
 * Saves a place, whole or not at all.
 *
 * throws  TrainError 'file' where it cannot be written; the place saved before stands then
 */
export function savePlace(path: string, belongs: Belongs, { data, lists }: Place): void {
  const text = Buffer.from(JSON.stringify({ belongs, data, lengths: lists.map((list) => list.byteLength) }));
  const length = Buffer.alloc(4);
  length.writeUInt32LE(text.length);
  const bytes = Buffer.concat([MAGIC, length, text, ...lists, Buffer.alloc(DIGEST_BYTES)]);
  const end = bytes.length - DIGEST_BYTES;
  createHash('sha256').update(bytes.subarray(0, end)).digest().copy(bytes, end);
  writeOutput(path, bytes);
}

/**
 * The place saved by an earlier run, null where there is none of use.
 *
 * say  told in a sentence why a place that is there is of no use
 */
export function readPlace(path: string, belongs: Belongs, say: (sentence: string) => void): Place | null {
  if (!existsSync(path)) return null;
  const anew = (why: string): null => {
    say(`${path}: ${why}, so reading starts anew.`);
    return null;
  };
  const bytes = readFileSync(path);
  const end = bytes.length - DIGEST_BYTES;
  const isWhole =
    end > MAGIC.length + 4 &&
    bytes.subarray(0, MAGIC.length).equals(MAGIC) &&
    createHash('sha256').update(bytes.subarray(0, end)).digest().equals(bytes.subarray(end));
  if (!isWhole) return anew('is damaged or of another version');
  const from = MAGIC.length + 4;
  const textEnd = from + bytes.readUInt32LE(MAGIC.length);
  const saved = JSON.parse(bytes.toString('utf8', from, textEnd)) as {
    belongs: Belongs;
    data: unknown;
    lengths: readonly number[];
  };
  const why = differenceOf(saved.belongs, belongs);
  if (why !== null) return anew(why);
  let at = textEnd;
  const lists = saved.lengths.map((length) => {
    at += length;
    return Uint8Array.from(bytes.subarray(at - length, at));
  });
  return { data: saved.data, lists };
}

function differenceOf(saved: Belongs, now: Belongs): string | null {
  if (saved.asked !== now.asked) return 'the site file or the options have changed since the interrupted run';
  const paths = (belongs: Belongs): string => belongs.files.map(({ path }) => path).join('\n');
  if (paths(saved) !== paths(now)) return 'other files are given than to the interrupted run';
  const changed = now.files.find((file, k) => digestOfPlain(file) !== digestOfPlain(saved.files[k]));
  return changed === undefined ? null : `${changed.path} has changed since the interrupted run`;
}

/** Takes the place away; nothing where there is none. */
export function forgetPlace(path: string): void {
  rmSync(path, { force: true });
}
