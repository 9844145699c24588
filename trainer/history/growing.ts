/**
 * A list of numbers of unknown length in one typed array that doubles: 8 bytes a reading, where an array of objects would
 * take fifty.
 */
export class GrowingList {
  #values = new Float64Array(1024);
  length = 0;

  push(value: number): void {
    if (this.length === this.#values.length) this.#reserve(this.length + 1);
    this.#values[this.length++] = value;
  }

  /** Adds many at once. */
  append(values: Float64Array): void {
    this.#reserve(this.length + values.length);
    this.#values.set(values, this.length);
    this.length += values.length;
  }

  /** The numbers so far, in an array of just their length. */
  take(): Float64Array {
    return this.#values.slice(0, this.length);
  }

  /** The numbers from..to where they lie: good until the next one is added. */
  view(from = 0, to = this.length): Float64Array {
    return this.#values.subarray(from, to);
  }

  /** Forgets the first `count`; the memory is kept for what comes. */
  drop(count: number): void {
    this.#values.copyWithin(0, count, this.length);
    this.length -= count;
  }

  #reserve(length: number): void {
    if (length <= this.#values.length) return;
    const wider = new Float64Array(Math.max(this.#values.length * 2, length));
    wider.set(this.#values.subarray(0, this.length));
    this.#values = wider;
  }
}
