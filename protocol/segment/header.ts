/**
 * The outside of a segment: what it is, where it belongs, where it starts and what its replay must end in.
 * Self-contained, so that any desk can file it before it can decode it. Numbers are varints (bytes.ts): on a thin link
 * each byte of each segment is paid for. Big-endian elsewhere.
 *
 * | offset | size | meaning |
 * | --- | --- | --- |
 * | 0 | 4 | magic "SWS1" |
 * | 4 | 1 | segment format: 1, 2 where no bundle made the forecasts, or 3 where a channel is coarser than its sensor |
 * | 5 | 1 | arithmetic version of the filter |
 * | 6 | 1 | flags: 1 keyed start, 2 bundle digest present, 4 corrections present, 8 coarser (format 3, always), others 0 |
 * | 7 | 8 | stream id, random, new for each fresh data folder |
 * | 15 | 0 or 32 | digest of the bundle document that made the forecasts; absent: no bundle |
 * | then | 1-5 | number within the stream |
 * | then | 1-8 | first tick, counted since 1970 UTC |
 * | then | 1-3 | ticks |
 * | then | 1-2 | channels: signals, then inputs |
 * | then | 1-2 | signals among them |
 * | then | 2-65 | site: length in bytes, then UTF-8 |
 * | then | 2-65 | gateway: length in bytes, then UTF-8 |
 * | then | 0 or 1-128 | coarser only: half a byte a channel, k: readings lie on every 2^k-th step of the lattice |
 * | then | 4 | check of the start state |
 * | then | 4 | check of the end state |
 * | then | 0 or 2.. | keyed start only: length, then the start state in raw DEFLATE (RFC 1951) |
 * | then | 0 or 2.. | corrections only: count, length, then late readings, range coded |
 * | then | 0.. | payload: the readings, range coded, up to the last 4 bytes |
 * | last 4 | 4 | CRC-32 of every byte before |
 *
 * The check of a state is the first 4 bytes of its SHA-256. A CRC would not do: a snapshot ends in its own CRC-32, and the
 * CRC-32 of any bytes followed by their CRC-32 is one constant, so that every state would pass for every other.
 * CRC-32 is the one of ITU-T V.42 (zlib). The content hash of a segment is SHA-256 over all its bytes, CRC included.
 */
import { createHash } from 'node:crypto';
import { crc32, deflateRawSync, inflateRawSync } from 'node:zlib';
import { MAX_CHANNELS, MAX_NAME_BYTES } from '../limits.ts';
import { isName, NAME_RULE } from '../name.ts';
import { ARITHMETIC, COARSE_SEGMENT_FORMAT, type PLAIN_SEGMENT_FORMAT, SEGMENT_FORMAT } from '../version.ts';
import { ByteCursor, type ByteSink } from './bytes.ts';
import { checkCoarseness, coarsenessBytes, packCoarseness, unpackCoarseness } from './coarseness.ts';
import {
  MAX_CORRECTIONS,
  MAX_SEGMENT_BYTES,
  MAX_SEGMENT_TICKS,
  MAX_SEGMENT_VALUES,
  MAX_STATE_BYTES,
  segmentError,
} from './limits.ts';

const MAGIC = [0x53, 0x57, 0x53, 0x31] as const;
const KEYED = 1;
const HAS_BUNDLE = 2;
const HAS_CORRECTIONS = 4;
const COARSE = 8;
const CRC_BYTES = 4;
const MAX_FIRST_TICK = Number.MAX_SAFE_INTEGER - MAX_SEGMENT_TICKS;

/** What a segment says of itself before anything inside is decoded. */
export interface SegmentHead {
  readonly format: number;
  readonly arithmetic: number;
  readonly site: string;
  readonly gateway: string;
  /** 8 random bytes. */
  readonly stream: Uint8Array;
  readonly number: number;
  /** 32 bytes; all zero where no bundle made the forecasts. */
  readonly bundle: Uint8Array;
  readonly firstTick: number;
  readonly ticks: number;
  readonly channelCount: number;
  readonly signalCount: number;
  /** (nc) k: readings lie on every 2^k-th step of the lattice; all 0: as the sensors said. Late readings are always that. */
  readonly coarseness: Uint8Array;
  /** 'keyed': the filter's state at the start is inside; 'chained': it is the end state of the segment before. */
  readonly start: 'chained' | 'keyed';
  /** Inflated start state of a keyed segment, its check done; null when chained. */
  readonly startState: Uint8Array | null;
  readonly startCheck: number;
  readonly endCheck: number;
}

/** Head and where the coded parts lie. */
export interface SegmentParts {
  readonly head: SegmentHead;
  readonly correctionCount: number;
  readonly corrections: Uint8Array;
  readonly payload: Uint8Array;
}

/** SHA-256 over all bytes of a segment: its name in receipts. 32 bytes. */
export function segmentHash(bytes: Uint8Array): Uint8Array {
  return new Uint8Array(createHash('sha256').update(bytes).digest());
}

/** First 4 bytes of SHA-256 over a saved filter state, as one number: equal for equal states alone, for all practical purposes. */
export function stateCheck(state: Uint8Array): number {
  return createHash('sha256').update(state).digest().readUInt32BE(0);
}

/**
 * Checks a segment's checksum and header and gives what it says of itself.
 *
 * throws  ProtocolError 'segment' when it is damaged, cut, extended, of another format or past a limit
 * cost    one pass over the bytes; inflates at most MAX_STATE_BYTES
 */
export function readSegmentHead(bytes: Uint8Array): SegmentHead {
  return readSegmentParts(bytes).head;
}

/** As readSegmentHead, with views of the coded parts. */
export function readSegmentParts(bytes: Uint8Array): SegmentParts {
  const end = checkFrame(bytes);
  const cursor = new ByteCursor(bytes, end);
  cursor.position = MAGIC.length;
  const format = cursor.varint('format', SEGMENT_FORMAT, COARSE_SEGMENT_FORMAT);
  const arithmetic = cursor.varint('arithmetic version', 1, ARITHMETIC);
  const flags = readFlags(cursor, format);
  const stream = cursor.take(8, 'stream id').slice();
  const bundle = flags & HAS_BUNDLE ? cursor.take(32, 'bundle digest').slice() : new Uint8Array(32);
  const number = cursor.varint('number', 0, 0xffffffff);
  const firstTick = cursor.varint('first tick', 0, MAX_FIRST_TICK);
  const ticks = cursor.varint('ticks', 0, MAX_SEGMENT_TICKS);
  const channelCount = cursor.varint('channels', 1, MAX_CHANNELS);
  const signalCount = cursor.varint('signals', 0, channelCount);
  if (ticks * channelCount > MAX_SEGMENT_VALUES)
    throw segmentError(`segment size: expected at most ${MAX_SEGMENT_VALUES} values, got ${ticks} × ${channelCount}`);
  const site = readName(cursor, 'site');
  const gateway = readName(cursor, 'gateway');
  const coarseness =
    flags & COARSE
      ? unpackCoarseness(cursor.take(coarsenessBytes(channelCount), 'coarseness'), channelCount)
      : new Uint8Array(channelCount);
  const startCheck = cursor.uint32('start state check');
  const endCheck = cursor.uint32('end state check');
  const startState = flags & KEYED ? readState(cursor, startCheck) : null;
  let correctionCount = 0;
  let corrections: Uint8Array = new Uint8Array(0);
  if (flags & HAS_CORRECTIONS) {
    correctionCount = cursor.varint('correction count', 1, MAX_CORRECTIONS);
    corrections = cursor.take(cursor.varint('correction bytes', 0, end), 'corrections');
  }
  const payload = cursor.take(end - cursor.position, 'payload');
  const start = startState === null ? 'chained' : 'keyed';
  const where = {
    format,
    arithmetic,
    site,
    gateway,
    stream,
    number,
    bundle,
    firstTick,
    ticks,
    channelCount,
    signalCount,
    coarseness,
  };
  const head: SegmentHead = Object.freeze({ ...where, start, startState, startCheck, endCheck });
  return { head, correctionCount, corrections, payload };
}

/** Format 3 is written for coarse channels alone, so that everything else stays readable for those who know no other. */
function readFlags(cursor: ByteCursor, format: number): number {
  const known = KEYED | HAS_BUNDLE | HAS_CORRECTIONS;
  if (format === COARSE_SEGMENT_FORMAT) return cursor.varint('flags', COARSE, COARSE | known);
  return cursor.varint('flags', 0, known);
}

/** What the writer knows when it closes a segment. */
export interface SegmentHeadFields {
  readonly site: string;
  readonly gateway: string;
  readonly stream: Uint8Array;
  readonly number: number;
  readonly bundle: Uint8Array;
  readonly firstTick: number;
  readonly channelCount: number;
  readonly signalCount: number;
  readonly startState: Uint8Array;
  readonly keyed: boolean;
  /** Of the formats without coarser channels, which say theirs by `coarseness`; SEGMENT_FORMAT unless said otherwise. */
  readonly format?: typeof SEGMENT_FORMAT | typeof PLAIN_SEGMENT_FORMAT;
  /** (nc) as in SegmentHead; absent: as the sensors said. */
  readonly coarseness?: Uint8Array;
}

/** Writes everything before the payload. */
export function writeSegmentHead(
  sink: ByteSink,
  fields: SegmentHeadFields,
  ticks: number,
  endState: Uint8Array,
  corrections: { readonly count: number; readonly bytes: Uint8Array },
): void {
  const hasBundle = fields.bundle.some((byte) => byte !== 0);
  const coarse = fields.coarseness?.some((power) => power > 0) ? fields.coarseness : null;
  sink.bytes(Uint8Array.from(MAGIC));
  sink.varint(coarse === null ? (fields.format ?? SEGMENT_FORMAT) : COARSE_SEGMENT_FORMAT);
  sink.varint(ARITHMETIC);
  sink.varint(
    (fields.keyed ? KEYED : 0) |
      (hasBundle ? HAS_BUNDLE : 0) |
      (corrections.count > 0 ? HAS_CORRECTIONS : 0) |
      (coarse === null ? 0 : COARSE),
  );
  sink.bytes(fields.stream);
  if (hasBundle) sink.bytes(fields.bundle);
  for (const value of [fields.number, fields.firstTick, ticks, fields.channelCount, fields.signalCount])
    sink.varint(value);
  writeName(sink, fields.site);
  writeName(sink, fields.gateway);
  if (coarse !== null) sink.bytes(packCoarseness(coarse));
  sink.uint32(stateCheck(fields.startState));
  sink.uint32(stateCheck(endState));
  if (fields.keyed) {
    const deflated = deflateRawSync(fields.startState, { level: 9 });
    sink.varint(deflated.length);
    sink.bytes(deflated);
  }
  if (corrections.count > 0) {
    sink.varint(corrections.count);
    sink.varint(corrections.bytes.length);
    sink.bytes(corrections.bytes);
  }
}

/** Closes a segment with its checksum. */
export function sealSegment(sink: ByteSink): Uint8Array {
  sink.uint32(crc32(sink.buffer.subarray(0, sink.length)));
  if (sink.length > MAX_SEGMENT_BYTES)
    throw segmentError(
      `segment size: expected at most ${MAX_SEGMENT_BYTES} bytes, got ${sink.length}; close it sooner`,
    );
  return sink.finish();
}

/** Refuses fields that no reader would take back; checked once, when a writer opens. */
export function checkHeadFields(fields: SegmentHeadFields): void {
  checkWhole('number', fields.number, 0, 0xffffffff);
  checkWhole('first tick', fields.firstTick, 0, MAX_FIRST_TICK);
  checkWhole('channels', fields.channelCount, 1, MAX_CHANNELS);
  checkWhole('signals', fields.signalCount, 0, fields.channelCount);
  checkWhole('stream id bytes', fields.stream.length, 8, 8);
  checkWhole('bundle digest bytes', fields.bundle.length, 32, 32);
  checkWhole('start state bytes', fields.startState.length, 0, MAX_STATE_BYTES);
  if (fields.coarseness !== undefined) checkCoarseness(fields.coarseness, fields.channelCount);
  if ((fields.format ?? SEGMENT_FORMAT) !== SEGMENT_FORMAT && fields.coarseness?.some((power) => power > 0))
    throw segmentError('segment coarseness: expected none without a bundle, got some');
  for (const field of ['site', 'gateway'] as const) checkName(field, fields[field]);
}

function checkName(field: string, name: string): string {
  if (isName(name)) return name;
  throw segmentError(`segment ${field}: expected ${NAME_RULE}, got ${JSON.stringify(name)}`, { field });
}

function checkWhole(field: string, value: number, least: number, most: number): void {
  if (!Number.isInteger(value) || value < least || value > most)
    throw segmentError(`segment ${field}: expected ${least}..${most}, got ${value}`, { field, least, most, value });
}

/** Size, magic and checksum; gives where the bytes before the checksum end. */
function checkFrame(bytes: Uint8Array): number {
  if (bytes.length < MAGIC.length + CRC_BYTES || bytes.length > MAX_SEGMENT_BYTES)
    throw segmentError(`segment size: expected 8..${MAX_SEGMENT_BYTES} bytes, got ${bytes.length}`);
  if (MAGIC.some((byte, i) => bytes[i] !== byte)) throw segmentError('segment magic: expected "SWS1", got other bytes');
  const end = bytes.length - CRC_BYTES;
  const stated = new DataView(bytes.buffer, bytes.byteOffset).getUint32(end);
  const found = crc32(bytes.subarray(0, end));
  if (stated !== found)
    throw segmentError(`segment checksum: expected ${hex(stated)}, got ${hex(found)}; it was damaged on the way`);
  return end;
}

function hex(crc: number): string {
  return crc.toString(16).padStart(8, '0');
}

function writeName(sink: ByteSink, name: string): void {
  const bytes = new TextEncoder().encode(name);
  sink.varint(bytes.length);
  sink.bytes(bytes);
}

function readName(cursor: ByteCursor, field: string): string {
  const bytes = cursor.take(cursor.varint(`${field} length`, 1, MAX_NAME_BYTES), field);
  let name: string;
  try {
    name = new TextDecoder('utf-8', { fatal: true, ignoreBOM: true }).decode(bytes);
  } catch (cause) {
    throw segmentError(`segment ${field}: expected UTF-8 text`, { field }, cause);
  }
  return checkName(field, name);
}

function readState(cursor: ByteCursor, startCheck: number): Uint8Array {
  const deflated = cursor.take(cursor.varint('start state length', 1, cursor.end), 'start state');
  const state = inflate(deflated);
  const found = stateCheck(state);
  if (found !== startCheck)
    throw segmentError(`segment start state: expected check ${hex(startCheck)}, got ${hex(found)}`);
  return state;
}

function inflate(deflated: Uint8Array): Uint8Array {
  let result: { buffer: Uint8Array; engine: { bytesWritten: number } };
  try {
    result = inflateRawSync(deflated, { maxOutputLength: MAX_STATE_BYTES, info: true }) as unknown as typeof result;
  } catch (cause) {
    throw segmentError(
      `segment start state: expected raw DEFLATE of at most ${MAX_STATE_BYTES} bytes, got something else`,
      {},
      cause,
    );
  }
  if (result.engine.bytesWritten !== deflated.length)
    throw segmentError('segment start state: expected nothing after the deflated bytes, got more');
  return new Uint8Array(result.buffer);
}
