/**
 * Closed segments on disk until the desk's receipt names them. Each is one file, written beside, synced and renamed, and
 * offered for sending only after the caller has released it. Bounded in bytes: the oldest goes first, together with the
 * chained ones behind it that could not be decoded without it, and that is counted.
 */
import { join } from 'node:path';
import { readSegmentHead, type SegmentHead, segmentHash } from '@stillwell/protocol';
import { type Disk, replaceOn, sweepParts } from '../disk.ts';

/** One segment waiting. */
export interface Waiting {
  readonly stream: string;
  readonly number: number;
  readonly bytes: number;
}

/** What was dropped to stay within the bound. */
export interface Shed {
  readonly segments: number;
  readonly bytes: number;
  /** In segments that could still be read. */
  readonly ticks: number;
}

/** See the file head. */
export class Spool {
  readonly #disk: Disk;
  readonly #folder: string;
  readonly #maxBytes: number;
  readonly #entries: Waiting[] = [];
  #bytes = 0;
  #damaged = 0;
  #isBroken = false;

  /**
   * maxBytes  most bytes kept; the newest segment is kept whatever its size
   * stream    the present stream, whose segments count as newer than any other's
   */
  constructor(disk: Disk, folder: string, maxBytes: number, stream: string) {
    this.#disk = disk;
    this.#folder = folder;
    this.#maxBytes = maxBytes;
    disk.makeFolder(folder);
    sweepParts(disk, folder);
    for (const name of disk.list(folder)) {
      const match = /^([0-9a-f]{16})-(\d{10})\.sws$/.exec(name);
      if (match === null) continue;
      this.#take({ stream: match[1]!, number: Number(match[2]), bytes: disk.size(join(folder, name)) });
    }
    this.#entries.sort((a, b) => Number(a.stream === stream) - Number(b.stream === stream));
  }

  /** Oldest first; streams before the present one come before it. */
  get waiting(): readonly Waiting[] {
    return this.#entries;
  }

  get bytes(): number {
    return this.#bytes;
  }

  /** Segments since the start whose file was gone or damaged when it was to be sent. */
  get damaged(): number {
    return this.#damaged;
  }

  /** Says that the desk will not have a segment, nor what hangs on it. */
  breakChain(): void {
    this.#isBroken = true;
  }

  /** Whether the chain has been broken since this was asked last: the next segment should then stand alone. */
  takeBreak(): boolean {
    const isBroken = this.#isBroken;
    this.#isBroken = false;
    return isBroken;
  }

  /** Writes a segment durably. It is listed, so `waiting` shows it: the caller releases it by sending. */
  put(stream: string, number: number, segment: Uint8Array): void {
    replaceOn(this.#disk, this.#path(stream, number), segment);
    const at = this.#entries.findIndex((entry) => entry.stream === stream && entry.number === number);
    if (at >= 0) this.#bytes -= this.#entries.splice(at, 1)[0]!.bytes;
    this.#take({ stream, number, bytes: segment.length });
  }

  /** The segment's bytes; null when the file is gone or does not check any more (it is dropped then). */
  read(entry: Waiting): Uint8Array | null {
    const bytes = this.#disk.read(this.#path(entry.stream, entry.number));
    try {
      if (bytes !== null) {
        readSegmentHead(bytes);
        return bytes;
      }
    } catch {
      // Damaged on disk: sending it would only make the desk refuse it.
    }
    this.#damaged++;
    this.breakChain();
    this.#drop(entry);
    return null;
  }

  /**
   * Deletes a segment that a receipt names.
   *
   * returns  'confirmed', 'unknown' (not here any more: a repeated receipt), or 'conflict' (other bytes went by this number)
   */
  confirm(stream: string, number: number, hash: Uint8Array): 'confirmed' | 'unknown' | 'conflict' {
    const entry = this.#entries.find((one) => one.stream === stream && one.number === number);
    if (entry === undefined) return 'unknown';
    const bytes = this.read(entry);
    if (bytes === null) return 'unknown';
    if (Buffer.compare(segmentHash(bytes), hash) !== 0) return 'conflict';
    this.#drop(entry);
    return 'confirmed';
  }

  /** Removes segments of a stream from `number` on: a boundary that a crash left half done, never sent. */
  discardFrom(stream: string, number: number): void {
    for (const entry of [...this.#entries]) if (entry.stream === stream && entry.number >= number) this.#drop(entry);
  }

  /** Drops the oldest until the bound holds, then any chained ones whose start is gone with them. */
  shed(): Shed {
    const shed = { segments: 0, bytes: 0, ticks: 0 };
    const drop = (): void => {
      const entry = this.#entries[0]!;
      shed.segments++;
      shed.bytes += entry.bytes;
      shed.ticks += this.#head(entry)?.ticks ?? 0;
      this.#drop(entry);
    };
    while (this.#bytes > this.#maxBytes && this.#entries.length > 1) drop();
    while (shed.segments > 0 && this.#entries.length > 0 && this.#head(this.#entries[0]!)?.start !== 'keyed') drop();
    // The open segment hangs on what is gone.
    if (shed.segments > 0 && this.#entries.length === 0) this.breakChain();
    return shed;
  }

  /** Null where the file is gone or damaged. */
  #head(entry: Waiting): SegmentHead | null {
    const bytes = this.#disk.read(this.#path(entry.stream, entry.number));
    try {
      return bytes === null ? null : readSegmentHead(bytes);
    } catch {
      return null;
    }
  }

  #take(entry: Waiting): void {
    this.#entries.push(entry);
    this.#bytes += entry.bytes;
  }

  #drop(entry: Waiting): void {
    this.#disk.remove(this.#path(entry.stream, entry.number));
    const at = this.#entries.indexOf(entry);
    if (at < 0) return;
    this.#entries.splice(at, 1);
    this.#bytes -= entry.bytes;
  }

  #path(stream: string, number: number): string {
    return join(this.#folder, `${stream}-${String(number).padStart(10, '0')}.sws`);
  }
}
