/**
 * Bytes in and out for headers: a growing writer and a checked cursor, with whole numbers as base-128 groups, lowest
 * group first (the "varint" of the trade). A number has one form only: a padded one is refused.
 */
import { segmentError } from './limits.ts';

const MAX_VARINT_BYTES = 8;

/** Grows by doubling; `length` bytes of `buffer` count. */
export class ByteSink {
  buffer: Uint8Array;
  length = 0;

  constructor(capacity = 256) {
    this.buffer = new Uint8Array(capacity);
  }

  byte(value: number): void {
    if (this.length === this.buffer.length) this.#grow(this.length + 1);
    this.buffer[this.length++] = value;
  }

  bytes(values: Uint8Array): void {
    if (this.length + values.length > this.buffer.length) this.#grow(this.length + values.length);
    this.buffer.set(values, this.length);
    this.length += values.length;
  }

  /** A whole number in [0, 2^53). */
  varint(value: number): void {
    while (value >= 128) {
      this.byte((value % 128) + 128);
      value = Math.floor(value / 128);
    }
    this.byte(value);
  }

  /** Big-endian 32 bits. */
  uint32(value: number): void {
    this.byte(value >>> 24);
    this.byte((value >>> 16) & 255);
    this.byte((value >>> 8) & 255);
    this.byte(value & 255);
  }

  finish(): Uint8Array {
    return this.buffer.slice(0, this.length);
  }

  #grow(needed: number): void {
    const larger = new Uint8Array(Math.max(needed, 2 * this.buffer.length));
    larger.set(this.buffer.subarray(0, this.length));
    this.buffer = larger;
  }
}

/** Reads `bytes` up to `end`; every read past it is refused with the field's name. */
export class ByteCursor {
  readonly bytes: Uint8Array;
  readonly end: number;
  position = 0;

  constructor(bytes: Uint8Array, end: number) {
    this.bytes = bytes;
    this.end = end;
  }

  byte(field: string): number {
    if (this.position >= this.end) throw this.#short(field, 1);
    return this.bytes[this.position++]!;
  }

  /** A view, not a copy. */
  take(count: number, field: string): Uint8Array {
    if (count > this.end - this.position) throw this.#short(field, count);
    const start = this.position;
    this.position += count;
    return this.bytes.subarray(start, this.position);
  }

  uint32(field: string): number {
    const b = this.take(4, field);
    return ((b[0]! << 24) | (b[1]! << 16) | (b[2]! << 8) | b[3]!) >>> 0;
  }

  varint(field: string, least: number, most: number): number {
    let value = 0;
    let weight = 1;
    for (let i = 0; i < MAX_VARINT_BYTES; i++) {
      const byte = this.byte(field);
      value += (byte & 127) * weight;
      if (byte < 128) {
        if (i > 0 && byte === 0)
          throw segmentError(`segment ${field}: expected the shortest form of a number, got padding`);
        if (value < least || value > most)
          throw segmentError(`segment ${field}: expected ${least}..${most}, got ${value}`, {
            field,
            least,
            most,
            value,
          });
        return value;
      }
      weight *= 128;
    }
    throw segmentError(`segment ${field}: expected a number of at most ${MAX_VARINT_BYTES} bytes, got a longer one`);
  }

  #short(field: string, count: number): Error {
    const left = this.end - this.position;
    return segmentError(`segment cut short at byte ${this.position}, ${field}: expected ${count} bytes, got ${left}`, {
      field,
      offset: this.position,
    });
  }
}
