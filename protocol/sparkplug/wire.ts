/**
 * Protocol Buffers on the wire, as much of it as a Sparkplug payload needs: varints, fixed numbers and lengths, read where
 * they lie. No text and no object is made. Malformed bytes end the reading and leave `isBad`; nothing throws, nothing is
 * read past the end, and every step moves on by at least one byte.
 *
 * source  Protocol Buffers documentation, "Encoding": a tag is field × 8 + wire type; types 0 varint, 1 eight bytes,
 *         2 length and bytes, 5 four bytes; 3 and 4 (groups) are long withdrawn and refused
 */

/** Wire types. */
export const VARINT = 0;
/** Eight bytes, little-endian. */
export const FIXED64 = 1;
/** A length, then so many bytes. */
export const BYTES = 2;
/** Four bytes, little-endian. */
export const FIXED32 = 5;

const TWO_32 = 2 ** 32;
const MOST_VARINT_BYTES = 10;

const scratch = new DataView(new ArrayBuffer(8));

/** A place in the fields of one message. */
export class WireReader {
  #bytes: Uint8Array = new Uint8Array(0);
  #at = 0;
  #end = 0;
  isBad = false;
  /** Of the field read last. */
  field = 0;
  wire = 0;
  /** Its number, in two halves without a sign; of BYTES the bounds of its content. */
  low = 0;
  high = 0;
  from = 0;
  to = 0;

  /** Begins at a message's first byte; `end` is behind its last one. */
  open(bytes: Uint8Array, from: number, end: number): void {
    this.#bytes = bytes;
    this.#at = from;
    this.#end = end;
    this.isBad = false;
  }

  /** Reads the next field; false at the end, or where the bytes are no field. */
  next(): boolean {
    if (this.#at >= this.#end) return false;
    if (!this.#varint()) return this.#fail();
    this.field = this.low >>> 3;
    this.wire = this.low & 7;
    if (this.field === 0 || this.high !== 0) return this.#fail();
    if (this.wire === VARINT) return this.#varint() || this.#fail();
    if (this.wire === FIXED64) return this.#fixed(8);
    if (this.wire === FIXED32) return this.#fixed(4);
    if (this.wire !== BYTES || !this.#varint()) return this.#fail();
    if (this.high !== 0 || this.low > this.#end - this.#at) return this.#fail();
    this.from = this.#at;
    this.to = this.#at + this.low;
    this.#at = this.to;
    return true;
  }

  /** The number of a varint or FIXED64 without a sign; beyond 2^53 no longer exact. */
  get unsigned(): number {
    return this.high * TWO_32 + this.low;
  }

  /** FIXED32 as a floating point number. */
  get float(): number {
    scratch.setUint32(0, this.low, true);
    return scratch.getFloat32(0, true);
  }

  /** FIXED64 as a floating point number. */
  get double(): number {
    scratch.setUint32(0, this.low, true);
    scratch.setUint32(4, this.high, true);
    return scratch.getFloat64(0, true);
  }

  #fail(): false {
    this.isBad = true;
    this.#at = this.#end;
    return false;
  }

  #varint(): boolean {
    const bytes = this.#bytes;
    let low = 0;
    let high = 0;
    for (let n = 0; n < MOST_VARINT_BYTES && this.#at < this.#end; n++) {
      const byte = bytes[this.#at++]!;
      const bits = byte & 0x7f;
      if (n < 4) low |= bits << (7 * n);
      else if (n === 4) {
        low |= bits << 28;
        high = bits >>> 4;
      } else high |= n === 9 ? (bits & 1) << 31 : bits << (7 * n - 32);
      if (byte < 0x80) {
        this.low = low >>> 0;
        this.high = high >>> 0;
        return true;
      }
    }
    return false;
  }

  #fixed(size: 4 | 8): boolean {
    if (this.#end - this.#at < size) return this.#fail();
    this.low = this.#uint32();
    this.high = size === 8 ? this.#uint32() : 0;
    return true;
  }

  #uint32(): number {
    const bytes = this.#bytes;
    const at = this.#at;
    this.#at += 4;
    return (bytes[at]! | (bytes[at + 1]! << 8) | (bytes[at + 2]! << 16) | (bytes[at + 3]! << 24)) >>> 0;
  }
}
