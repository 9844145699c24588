/**
 * The journal of the open segment: readings as they arrive, one frame per closed tick, and late changes, so that a
 * restart from the checkpoint replays to the same bits. A torn tail, as a power cut leaves it, is cut off at the first
 * frame that does not check; nothing behind it is believed. Not an archive: a file lives until its ticks are in a synced
 * segment, and a little longer to warm new bundles with.
 *
 * | offset | size | meaning (big-endian) |
 * | --- | --- | --- |
 * | 0 | 4 | magic "SWJ2" |
 * | 4 | 2 | reserved, 0 |
 * | 6 | 2 | channels nc |
 * | 8 | 8 | stream id |
 * | 16 | 4 | number of the segment it belongs to |
 * | 20 | 4 | CRC-32 of bytes 0-19 |
 * | 24 | .. | frames: length of what follows the CRC (4), its CRC-32 (4), kind (1), body |
 *
 * Bodies. 1 tick: tick (8, float64), nc readings (8 each, float64, NaN missing). 2 late change: tick (8), channel (2),
 * value (8). 3 where the file starts: time of the newest reading (8), nc last counter readings (8 each), nc times of the
 * newest readings (8 each), all float64, NaN unknown. 4 readings: channel (2), time (8), value (8) each. A file begins
 * with frames 3 and 4 for the ticks open at that moment.
 *
 * Frames gather in memory until `flush`, so that many arrivals cost one write.
 */
import { crc32 } from 'node:zlib';
import { type AppendFile, type Disk, replaceOn } from '../disk.ts';
import type { LateChange, OpenReadings, ReadingMarks } from '../ingest/align.ts';

/** What stands at the head of a journal file. */
export interface WalHead {
  readonly channelCount: number;
  /** 8 bytes. */
  readonly stream: Uint8Array;
  readonly number: number;
}

/** Readings in order of arrival, a row in each array. */
export interface JournalledReadings {
  readonly channels: Uint16Array;
  /** ms since 1970. */
  readonly times: Float64Array;
  readonly values: Float64Array;
}

/** Visits readings in order. */
export function eachReading(
  { channels, times, values }: JournalledReadings,
  visit: (channel: number, timeMs: number, value: number) => void,
): void {
  for (let i = 0; i < channels.length; i++) visit(channels[i]!, times[i]!, values[i]!);
}

/** One frame of a journal file. */
export type WalRecord =
  | { readonly kind: 'tick'; readonly tick: number; readonly values: Float64Array }
  | ({ readonly kind: 'change' } & LateChange)
  | { readonly kind: 'start'; readonly marks: ReadingMarks }
  | ({ readonly kind: 'readings' } & JournalledReadings);

/** A journal file, as far as it checks. */
export interface WalContent {
  readonly head: WalHead;
  readonly records: readonly WalRecord[];
  /** Bytes that check; what lies behind is torn. */
  readonly validBytes: number;
}

const MAGIC = 0x53574a32;
const HEAD_BYTES = 24;
const FRAME_BYTES = 8;
const TICK = 1;
const CHANGE = 2;
const START = 3;
const READINGS = 4;
const READING_BYTES = 18;
/** Larger than any frame that is written. */
const MAX_BODY_BYTES = 1024 * 1024;
/** Gathered bytes that are written without waiting for `flush`. */
const GATHER_BYTES = 64 * 1024;

/** Reads a journal file; null when its head does not check. */
export function readWal(bytes: Uint8Array): WalContent | null {
  if (bytes.length < HEAD_BYTES) return null;
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  if (view.getUint32(0) !== MAGIC || view.getUint16(4) !== 0) return null;
  if (view.getUint32(20) !== crc32(bytes.subarray(0, 20))) return null;
  const head: WalHead = {
    channelCount: view.getUint16(6),
    stream: bytes.slice(8, 16),
    number: view.getUint32(16),
  };
  const records: WalRecord[] = [];
  let at = HEAD_BYTES;
  while (at + FRAME_BYTES < bytes.length) {
    const length = view.getUint32(at);
    const from = at + FRAME_BYTES;
    if (length === 0 || length > MAX_BODY_BYTES || from + length > bytes.length) break;
    const body = bytes.subarray(from, from + length);
    if (view.getUint32(at + 4) !== crc32(body)) break;
    const record = readBody(body, head.channelCount);
    if (record === null) break;
    records.push(record);
    at = from + length;
  }
  return { head, records, validBytes: at };
}

function readBody(body: Uint8Array, channelCount: number): WalRecord | null {
  const view = new DataView(body.buffer, body.byteOffset, body.byteLength);
  const kind = body[0];
  if (kind === TICK && body.length === 9 + 8 * channelCount) {
    const values = new Float64Array(channelCount);
    for (let c = 0; c < channelCount; c++) values[c] = view.getFloat64(9 + 8 * c);
    return { kind: 'tick', tick: view.getFloat64(1), values };
  }
  if (kind === CHANGE && body.length === 19)
    return { kind: 'change', tick: view.getFloat64(1), channel: view.getUint16(9), value: view.getFloat64(11) };
  if (kind === START && body.length === 9 + 16 * channelCount) return readStart(view, channelCount);
  if (kind === READINGS && (body.length - 1) % READING_BYTES === 0) return readReadings(view);
  return null;
}

function readStart(view: DataView, channelCount: number): WalRecord {
  const numbers = (at: number): number[] => Array.from({ length: channelCount }, (_, c) => view.getFloat64(at + 8 * c));
  const newestMs = view.getFloat64(1);
  return {
    kind: 'start',
    marks: {
      newestMs: Number.isNaN(newestMs) ? Number.NEGATIVE_INFINITY : newestMs,
      counters: numbers(9),
      latest: numbers(9 + 8 * channelCount),
    },
  };
}

function readReadings(view: DataView): WalRecord {
  const count = (view.byteLength - 1) / READING_BYTES;
  const channels = new Uint16Array(count);
  const times = new Float64Array(count);
  const values = new Float64Array(count);
  for (let i = 0, at = 1; i < count; i++, at += READING_BYTES) {
    channels[i] = view.getUint16(at);
    times[i] = view.getFloat64(at + 2);
    values[i] = view.getFloat64(at + 10);
  }
  return { kind: 'readings', channels, times, values };
}

/**
 * Creates or replaces a journal file durably, with the readings of the ticks open at this moment; a power cut leaves the
 * old file or the new one.
 *
 * returns  its length, to open it with
 */
export function startWal(disk: Disk, path: string, head: WalHead, open: OpenReadings): number {
  const frames = new Frames();
  frames.start(open.marks);
  open.visit((channel, timeMs, value) => frames.reading(channel, timeMs, value));
  const bytes = Buffer.concat([headBytes(head), frames.take()]);
  replaceOn(disk, path, bytes);
  return bytes.length;
}

/** An open journal file. What is added is not yet durable; `sync` makes it so. */
export class Wal {
  readonly #file: AppendFile;
  readonly #frames = new Frames();
  #bytes: number;
  #isDirty = false;
  #underWay: Promise<void> | null = null;

  /** keepBytes  what `startWal` returned, or `validBytes` of a file read before */
  constructor(disk: Disk, path: string, keepBytes: number) {
    this.#file = disk.openAppend(path, keepBytes);
    this.#bytes = keepBytes;
  }

  /** Bytes of the file with what is gathered. */
  get bytes(): number {
    return this.#bytes + this.#frames.length;
  }

  /** Whether anything was added that no sync under way or done covers. */
  get isDirty(): boolean {
    return this.#isDirty || this.#frames.length > 0;
  }

  /** Whether all that was added is on disk. */
  get isDurable(): boolean {
    return !this.isDirty && this.#underWay === null;
  }

  tick(tick: number, values: Float64Array): void {
    this.#frames.tick(tick, values);
    this.#spill();
  }

  change(change: LateChange): void {
    this.#frames.change(change);
    this.#spill();
  }

  reading(channel: number, timeMs: number, value: number): void {
    this.#frames.reading(channel, timeMs, value);
    this.#spill();
  }

  /** Hands what is gathered to the system, where it outlives the process; not while a sync runs, which could block. */
  flush(): void {
    if (this.#underWay === null) this.#write();
  }

  sync(): void {
    this.#write();
    if (!this.#isDirty) return;
    this.#file.sync();
    this.#isDirty = false;
  }

  /** Off the main thread; what is added meanwhile waits for the next one. */
  async syncSoon(): Promise<void> {
    this.#write();
    if (!this.#isDirty) return;
    this.#isDirty = false;
    this.#underWay = this.#file.syncSoon();
    try {
      await this.#underWay;
    } catch (error) {
      this.#isDirty = true;
      throw error;
    } finally {
      this.#underWay = null;
    }
  }

  /** Lets the file go, once no sync runs on it any more. */
  close(): void {
    if (this.#underWay === null) this.#file.close();
    else
      void this.#underWay
        .catch(() => {})
        .then(() => this.#file.close())
        .catch(() => {});
  }

  #spill(): void {
    if (this.#frames.length >= GATHER_BYTES) this.#write();
  }

  #write(): void {
    if (this.#frames.length === 0) return;
    const bytes = this.#frames.take();
    this.#bytes += bytes.length;
    this.#isDirty = true;
    this.#file.append(bytes);
  }
}

/** Frames being gathered; readings in a row share one. */
class Frames {
  #buffer = Buffer.alloc(4096);
  #length = 0;
  /** Where the frame of readings starts that may still grow; -1: none. */
  #openAt = -1;

  get length(): number {
    return this.#length;
  }

  tick(tick: number, values: Float64Array): void {
    const from = this.#begin(TICK, 8 + 8 * values.length);
    this.#buffer.writeDoubleBE(tick, from);
    this.#doubles(values, from + 8);
    this.#seal(from);
  }

  change({ tick, channel, value }: LateChange): void {
    const from = this.#begin(CHANGE, READING_BYTES);
    this.#buffer.writeDoubleBE(tick, from);
    this.#buffer.writeUInt16BE(channel, from + 8);
    this.#buffer.writeDoubleBE(value, from + 10);
    this.#seal(from);
  }

  start({ newestMs, counters, latest }: ReadingMarks): void {
    const from = this.#begin(START, 8 + 8 * counters.length + 8 * latest.length);
    this.#buffer.writeDoubleBE(Number.isFinite(newestMs) ? newestMs : Number.NaN, from);
    this.#doubles(counters, from + 8);
    this.#doubles(latest, from + 8 + 8 * counters.length);
    this.#seal(from);
  }

  reading(channel: number, timeMs: number, value: number): void {
    if (this.#openAt >= 0 && this.#length - this.#openAt > GATHER_BYTES) this.#sealReadings();
    if (this.#openAt < 0) this.#openAt = this.#begin(READINGS, 0);
    const at = this.#grow(READING_BYTES);
    this.#buffer.writeUInt16BE(channel, at);
    this.#buffer.writeDoubleBE(timeMs, at + 2);
    this.#buffer.writeDoubleBE(value, at + 10);
  }

  /** A copy of the whole frames so far, which are then forgotten. */
  take(): Buffer {
    this.#sealReadings();
    const bytes = Buffer.from(this.#buffer.subarray(0, this.#length));
    this.#length = 0;
    return bytes;
  }

  /** Opens a frame with room for `bodyBytes`; where they go. */
  #begin(kind: number, bodyBytes: number): number {
    this.#sealReadings();
    const at = this.#grow(FRAME_BYTES + 1 + bodyBytes);
    this.#buffer[at + FRAME_BYTES] = kind;
    return at + FRAME_BYTES + 1;
  }

  /** Length and CRC of the frame whose body starts at `from` and ends here. */
  #seal(from: number): void {
    const body = this.#buffer.subarray(from - 1, this.#length);
    this.#buffer.writeUInt32BE(body.length, from - 1 - FRAME_BYTES);
    this.#buffer.writeUInt32BE(crc32(body), from - 5);
  }

  #sealReadings(): void {
    if (this.#openAt >= 0) this.#seal(this.#openAt);
    this.#openAt = -1;
  }

  #doubles(values: ArrayLike<number>, at: number): void {
    for (let i = 0; i < values.length; i++) this.#buffer.writeDoubleBE(values[i]!, at + 8 * i);
  }

  #grow(bytes: number): number {
    const at = this.#length;
    if (at + bytes > this.#buffer.length) {
      const larger = Buffer.alloc(2 * (at + bytes));
      this.#buffer.copy(larger, 0, 0, at);
      this.#buffer = larger;
    }
    this.#length = at + bytes;
    return at;
  }
}

function headBytes(head: WalHead): Buffer {
  const bytes = Buffer.alloc(HEAD_BYTES);
  bytes.writeUInt32BE(MAGIC, 0);
  bytes.writeUInt16BE(head.channelCount, 6);
  bytes.set(head.stream, 8);
  bytes.writeUInt32BE(head.number, 16);
  bytes.writeUInt32BE(crc32(bytes.subarray(0, 20)), 20);
  return bytes;
}
