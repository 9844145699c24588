/**
 * Single readings that jump away and are back at the next tick, further than the signal ever does of late: taken for missing.
 * One wrong reading would outweigh thousands of true ones in sums of squares. A jump that stays is a step and is kept; one
 * that recurs in half of the recent stretches is the plant's own doing and is kept from then on.
 */

/** Readings of a stretch; how many stretches are remembered, and how many there must be before anything counts as wild. */
const STRETCH = 256;
const STRETCHES = 16;
const LEAST_STRETCHES = 8;
/** Times the mean size of changes, and times the median stretch's largest. */
const BEYOND_MEAN = 30;
const BEYOND_USUAL = 3;
/** What is left of the way away when it is back, at most. */
const WAY_BACK = 0.5;
/** Changes that the mean remembers. */
const MEMORY = 4096;
/** Numbers of one channel's state in a file. */
export const WILD_STATE = STRETCHES + 5;

/** One signal's watch. The reading before the newest is judged once the newest is there. */
export class WildWatch {
  /** Last reading that was believed; NaN: none yet. */
  #last = Number.NaN;
  #mean = 0;
  #seen = 0;
  #largest = 0;
  readonly #largestOf = new Float64Array(STRETCHES);
  #limit = Number.POSITIVE_INFINITY;

  /** Marks as missing what is no number or wild in from..to, whose next are there. */
  passOver(row: Float64Array, from: number, to: number): void {
    for (let t = from; t < to; t++) {
      const value = row[t];
      if (value - value !== 0 || this.#isWild(value, row[t + 1])) row[t] = Number.NaN;
    }
  }

  /** Whether `value` is wild, given the reading at the next tick; NaN where there is none. */
  #isWild(value: number, next: number): boolean {
    const last = this.#last;
    if (Number.isNaN(last)) {
      this.#last = value;
      return false;
    }
    const jump = Math.abs(value - last);
    const isWild = jump > this.#limit && Math.abs(next - last) <= WAY_BACK * jump;
    this.#learn(jump, isWild);
    if (!isWild) this.#last = value;
    return isWild;
  }

  #learn(jump: number, isWild: boolean): void {
    this.#seen++;
    if (jump > this.#largest) this.#largest = jump;
    if (!isWild) this.#mean += (jump - this.#mean) / Math.min(this.#seen, MEMORY);
    if (this.#seen % STRETCH !== 0) return;
    const stretches = this.#seen / STRETCH;
    this.#largestOf[(stretches - 1) % STRETCHES] = this.#largest;
    this.#largest = 0;
    if (stretches < LEAST_STRETCHES) return;
    const known = this.#largestOf.slice(0, Math.min(stretches, STRETCHES)).sort();
    this.#limit = Math.max(BEYOND_MEAN * this.#mean, BEYOND_USUAL * known[known.length >> 1]);
  }

  /** (WILD_STATE) what it knows. */
  state(): Float64Array {
    return Float64Array.of(...this.#largestOf, this.#last, this.#mean, this.#seen, this.#largest, this.#limit);
  }

  /** Goes on from what it knew. */
  restore(state: Float64Array): void {
    this.#largestOf.set(state.subarray(0, STRETCHES));
    [this.#last, this.#mean, this.#seen, this.#largest, this.#limit] = state.subarray(STRETCHES);
  }
}
