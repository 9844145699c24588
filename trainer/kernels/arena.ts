/**
 * One memory of a fixed size, handed out from the bottom in the order asked and taken back to a mark; tables that stay are
 * handed out from the top. It never grows, since growing would detach every view that is out.
 */

const PAGE = 65_536;
const ALIGN = 64;
/** Byte 0 is never handed out. */
const FIRST = ALIGN;
/** WebAssembly addresses are of 32 bits. */
const MOST = 65_536 * PAGE;

/** The memory and what of it is taken. */
export class Arena {
  readonly buffer: ArrayBuffer;
  #bottom = FIRST;
  #top: number;
  /** Above it nothing was ever handed out, so all is still zero. */
  #touched = FIRST;

  constructor(buffer: ArrayBuffer) {
    this.buffer = buffer;
    this.#top = buffer.byteLength;
  }

  /** Pages that hold so many bytes and those of its own, or a RangeError where WebAssembly has no such memory. */
  static pages(bytes: number, own: number): number {
    const most = MOST - FIRST - own;
    if (!(bytes >= 0 && bytes <= most)) {
      throw new RangeError(`A memory for the kernels of ${bytes} bytes: expected 0 to ${most}.`);
    }
    return Math.ceil((bytes + own + FIRST) / PAGE);
  }

  /** Takes bytes from the bottom, zeroed; returns their offset. */
  take(bytes: number): number {
    const at = this.takeRaw(bytes);
    if (at < this.#touched) new Uint8Array(this.buffer, at, Math.min(bytes, this.#touched - at)).fill(0);
    this.#touched = Math.max(this.#touched, this.#bottom);
    return at;
  }

  /** The same for scratch that is written before it is read: whatever bytes were there. */
  takeRaw(bytes: number): number {
    const at = this.#bottom;
    const end = at + Math.ceil(bytes / ALIGN) * ALIGN;
    if (!(end <= this.#top)) throw this.#full(bytes);
    this.#bottom = end;
    return at;
  }

  /** Takes bytes from the top, for good. */
  takeTable(bytes: number): number {
    const at = this.#top - Math.ceil(bytes / ALIGN) * ALIGN;
    if (!(at >= this.#bottom)) throw this.#full(bytes);
    this.#top = at;
    return at;
  }

  mark(): number {
    return this.#bottom;
  }

  release(mark: number): void {
    if (!(mark >= FIRST && mark <= this.#bottom)) {
      throw new RangeError(`A mark of the kernels' memory: expected ${FIRST} to ${this.#bottom}, got ${mark}.`);
    }
    this.#touched = Math.max(this.#touched, this.#bottom);
    this.#bottom = mark;
  }

  #full(bytes: number): RangeError {
    return new RangeError(
      `The kernels' memory of ${this.buffer.byteLength} bytes is full: ${bytes} more asked, ${this.#top - this.#bottom} ` +
        'free. Create the kernels with more bytes, or release what is no longer needed.',
    );
  }
}
