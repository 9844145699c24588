/**
 * The journal of the open segment: one frame per closed tick, written before the filter sees it, so that a restart from
 * the checkpoint replays to the same bits. A torn tail, as a power cut leaves it, is cut off at the first frame that does
 * not check; nothing behind it is believed. Not an archive: a file lives until its ticks are in a synced segment, and a
 * little longer to warm new bundles with.
 *
 * | offset | size | meaning (big-endian) |
 * | --- | --- | --- |
 * | 0 | 4 | magic "SWJ1" |
 * | 4 | 2 | reserved, 0 |
 * | 6 | 2 | channels nc |
 * | 8 | 8 | stream id |
 * | 16 | 4 | number of the segment it belongs to |
 * | 20 | 4 | CRC-32 of bytes 0-19 |
 * | 24 | .. | frames: length of what follows the CRC (4), its CRC-32 (4), kind (1), body |
 *
 * Bodies. 1 tick: tick (8, float64), nc readings (8 each, float64, NaN missing). 2 late change: tick (8), channel (2),
 * value (8). 3 open readings, at a clean stop: MessagePack.
 */
import { crc32 } from 'node:zlib';
import { decode, encode } from '@stillwell/protocol';
import type { AppendFile, Disk } from '../disk.ts';
import type { LateChange, OpenReadings } from '../ingest/align.ts';

/** What stands at the head of a journal file. */
export interface WalHead {
  readonly channelCount: number;
  /** 8 bytes. */
  readonly stream: Uint8Array;
  readonly number: number;
}

/** One frame of a journal file. */
export type WalRecord =
  | { readonly kind: 'tick'; readonly tick: number; readonly values: Float64Array }
  | ({ readonly kind: 'change' } & LateChange)
  | { readonly kind: 'open'; readonly open: OpenReadings };

/** A journal file, as far as it checks. */
export interface WalContent {
  readonly head: WalHead;
  readonly records: readonly WalRecord[];
  /** Bytes that check; what lies behind is torn. */
  readonly validBytes: number;
}

const MAGIC = 0x53574a31;
const HEAD_BYTES = 24;
const FRAME_BYTES = 8;
const TICK = 1;
const CHANGE = 2;
const OPEN = 3;
/** Open readings of a flooded tick or two; ticks are far smaller. */
const MAX_BODY_BYTES = 16 * 1024 * 1024;

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
  if (kind === OPEN) return readOpen(body.subarray(1));
  return null;
}

function readOpen(bytes: Uint8Array): WalRecord | null {
  try {
    const limits = { maxBytes: MAX_BODY_BYTES, maxItems: 1_000_000 };
    const { newestMs, channels, times, values, counters, latest } = decode(bytes, limits) as {
      newestMs: number | null;
      channels: number[];
      times: number[];
      values: number[];
      counters: (number | null)[];
      latest: (number | null)[];
    };
    const open = { newestMs: newestMs ?? Number.NEGATIVE_INFINITY, channels, times, values };
    return { kind: 'open', open: { ...open, counters: withGaps(counters), latest: withGaps(latest) } };
  } catch {
    return null;
  }
}

function withGaps(values: readonly (number | null)[]): number[] {
  return values.map((value) => value ?? Number.NaN);
}

function withNulls(values: readonly number[]): (number | null)[] {
  return values.map((value) => (Number.isNaN(value) ? null : value));
}

/** An open journal file. Appending is not yet durable; `sync` makes it so. */
export class Wal {
  readonly #file: AppendFile;
  readonly #tick: Buffer;
  readonly #channelCount: number;
  #isDirty = true;

  /** keepBytes  0 for a new file; `validBytes` of one read before */
  constructor(disk: Disk, path: string, head: WalHead, keepBytes = 0) {
    this.#channelCount = head.channelCount;
    this.#tick = Buffer.alloc(FRAME_BYTES + 9 + 8 * head.channelCount);
    this.#file = disk.openAppend(path, keepBytes);
    if (keepBytes === 0) this.#file.append(headBytes(head));
  }

  /** Whether anything was appended since the last sync. */
  get isDirty(): boolean {
    return this.#isDirty;
  }

  tick(tick: number, values: Float64Array): void {
    const frame = this.#tick;
    frame[FRAME_BYTES] = TICK;
    frame.writeDoubleBE(tick, FRAME_BYTES + 1);
    for (let c = 0; c < this.#channelCount; c++) frame.writeDoubleBE(values[c]!, FRAME_BYTES + 9 + 8 * c);
    this.#append(frame);
  }

  change(change: LateChange): void {
    const frame = Buffer.alloc(FRAME_BYTES + 19);
    frame[FRAME_BYTES] = CHANGE;
    frame.writeDoubleBE(change.tick, FRAME_BYTES + 1);
    frame.writeUInt16BE(change.channel, FRAME_BYTES + 9);
    frame.writeDoubleBE(change.value, FRAME_BYTES + 11);
    this.#append(frame);
  }

  open(open: OpenReadings): void {
    const body = encode({
      newestMs: Number.isFinite(open.newestMs) ? open.newestMs : null,
      channels: open.channels,
      times: open.times,
      values: open.values,
      counters: withNulls(open.counters),
      latest: withNulls(open.latest),
    });
    const frame = Buffer.alloc(FRAME_BYTES + 1 + body.length);
    frame[FRAME_BYTES] = OPEN;
    frame.set(body, FRAME_BYTES + 1);
    this.#append(frame);
  }

  sync(): void {
    if (!this.#isDirty) return;
    this.#file.sync();
    this.#isDirty = false;
  }

  /** Off the main thread; what is appended meanwhile waits for the next one. */
  async syncSoon(): Promise<void> {
    if (!this.#isDirty) return;
    this.#isDirty = false;
    try {
      await this.#file.syncSoon();
    } catch (error) {
      this.#isDirty = true;
      throw error;
    }
  }

  close(): void {
    this.#file.close();
  }

  #append(frame: Buffer): void {
    const body = frame.subarray(FRAME_BYTES);
    frame.writeUInt32BE(body.length, 0);
    frame.writeUInt32BE(crc32(body), 4);
    this.#file.append(frame);
    this.#isDirty = true;
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
