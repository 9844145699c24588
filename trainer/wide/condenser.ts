/**
 * The condenser file: what turns frames of one sensor into its few states, so that later recordings are condensed alike.
 *
 * | offset | size | meaning |
 * | --- | --- | --- |
 * | 0 | 8 | "SWCONDNS" |
 * | 8 | 4 | version, 1; little endian, as all numbers here |
 * | 12 | 4 | length h of the head |
 * | 16 | h | head: JSON, UTF-8, with the lengths of the arrays |
 * | 16 + h | 8 each | the arrays in the order of ARRAYS, float64 |
 * | end − 32 | 32 | SHA-256 of everything before it |
 */
import { createHash } from 'node:crypto';
import { readFileSync } from 'node:fs';
import { TrainError } from '../errors.ts';
import { unreadable } from '../history/refusal.ts';

/** What a condenser is of. */
export interface CondenserShape {
  /** Numbers in a frame. */
  readonly frameLength: number;
  readonly tickMs: number;
  /** Numbers that a frame is projected to; those of the frame itself where it has no more. */
  readonly numbers: number;
  /** Frames in the past window, and steps that are forecast. */
  readonly window: number;
  readonly horizon: number;
  /** Random features of the window beside the window itself; 0 for none. */
  readonly features: number;
  readonly seed: number;
}

/** What it was learned from, and what came of it. */
export interface CondenserRecord {
  readonly source: string;
  readonly frames: number;
  readonly startMs: number;
  /** Time of the first frame that was not learned from. */
  readonly learnedUntilMs: number;
  /** Time of the first frame that did not decide anything: those from here on are held out. */
  readonly decidedUntilMs: number;
  readonly rank: number;
  readonly order: number;
  readonly rows: number;
  /** Energy of the learned rows, and the part that the rank let go. */
  readonly energy: number;
  readonly discarded: number;
  readonly ridge: number;
  readonly radius: number;
  readonly orthogonality: number;
  /** Scale of projected numbers, width of the features' kernel (0 without), factor on features. */
  readonly scale: number;
  readonly featureWidth: number;
  readonly featureScale: number;
}

/** All of it. */
export interface Condenser {
  readonly shape: CondenserShape;
  readonly record: CondenserRecord;
  /** (numbers) taken from projected frames before they are divided by the scale. */
  readonly mean: Float64Array;
  /** (features) taken from features. */
  readonly featureMean: Float64Array;
  /** (order × (window · numbers + features)). */
  readonly stateMap: Float64Array;
  /** (horizon · numbers × order). */
  readonly forecastMap: Float64Array;
  /** (horizon · numbers) what each number's own newest value adds to its forecasts. */
  readonly own: Float64Array;
  /** (order × order). */
  readonly transition: Float64Array;
  /** (rank) falling. */
  readonly singularValues: Float64Array;
  /** (order) share of the energy to come that each state forecast, in the windows that decided. */
  readonly explained: Float64Array;
}

const MAGIC = 'SWCONDNS';
const VERSION = 1;
const ARRAYS = [
  'mean',
  'featureMean',
  'stateMap',
  'forecastMap',
  'own',
  'transition',
  'singularValues',
  'explained',
] as const satisfies readonly (keyof Condenser)[];

interface Head {
  readonly shape: CondenserShape;
  readonly record: CondenserRecord;
  readonly lengths: readonly number[];
}

/** The file's bytes: the same for the same condenser. */
export function encodeCondenser(condenser: Condenser): Buffer {
  const { shape, record } = condenser;
  const lengths = ARRAYS.map((name) => condenser[name].length);
  const head = Buffer.from(JSON.stringify({ shape, record, lengths } satisfies Head), 'utf8');
  const start = Buffer.alloc(16);
  start.write(MAGIC, 'latin1');
  start.writeUInt32LE(VERSION, 8);
  start.writeUInt32LE(head.length, 12);
  const arrays = ARRAYS.map((name) => {
    const bytes = Buffer.alloc(8 * condenser[name].length);
    condenser[name].forEach((value, k) => {
      bytes.writeDoubleLE(value, 8 * k);
    });
    return bytes;
  });
  const body = Buffer.concat([start, head, ...arrays]);
  return Buffer.concat([body, createHash('sha256').update(body).digest()]);
}

/**
 * Reads it back.
 *
 * throws  TrainError 'file' where the bytes are none, of another version, or damaged
 */
export function decodeCondenser(bytes: Buffer, path: string): Condenser {
  if (bytes.length < 48 || bytes.toString('latin1', 0, 8) !== MAGIC)
    throw refused(path, 'a condenser file', 'another kind of file', 'give the condenser that a learning run wrote');
  const version = bytes.readUInt32LE(8);
  if (version !== VERSION)
    throw refused(path, `a condenser of version ${VERSION}`, `version ${version}`, 'learn it again with this program');
  const body = bytes.subarray(0, bytes.length - 32);
  if (
    !createHash('sha256')
      .update(body)
      .digest()
      .equals(bytes.subarray(bytes.length - 32))
  )
    throw refused(path, 'a checksum that agrees with the rest', 'another', 'the file is damaged: fetch it again');
  const end = 16 + body.readUInt32LE(12);
  const { shape, record, lengths } = JSON.parse(body.toString('utf8', 16, end)) as Head;
  let at = end;
  const arrays = lengths.map((length) => {
    const values = Float64Array.from({ length }, (_, k) => body.readDoubleLE(at + 8 * k));
    at += 8 * length;
    return values;
  });
  const [mean, featureMean, stateMap, forecastMap, own, transition, singularValues, explained] = arrays;
  return { shape, record, mean, featureMean, stateMap, forecastMap, own, transition, singularValues, explained };
}

/** From its place; throws as `decodeCondenser`, and 'file' where it cannot be read. */
export function readCondenser(path: string): Condenser {
  if (path === '') throw new TrainError('file', '--with: expected a path, got an empty one');
  let bytes: Buffer;
  try {
    bytes = readFileSync(path);
  } catch (cause) {
    throw unreadable(path, 'a condenser file', cause);
  }
  return decodeCondenser(bytes, path);
}

function refused(path: string, expected: string, got: string, remedy: string): TrainError {
  return new TrainError('file', `${path}: expected ${expected}, got ${got}; ${remedy}`);
}
