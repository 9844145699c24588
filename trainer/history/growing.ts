/**
 * A list of numbers of unknown length in one typed array that doubles: 8 bytes a reading, where an array of objects would
 * take fifty.
 */
export class GrowingList {
  #values = new Float64Array(1024);
  length = 0;

  push(value: number): void {
    if (this.length === this.#values.length) {
      const wider = new Float64Array(this.#values.length * 2);
      wider.set(this.#values);
      this.#values = wider;
    }
    this.#values[this.length++] = value;
  }

  /** The numbers so far, in an array of just their length. */
  take(): Float64Array {
    return this.#values.slice(0, this.length);
  }
}
