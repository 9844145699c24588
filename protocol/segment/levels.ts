/**
 * Counts of what followed what, for channels that come back to a few levels (a pump on or off, a valve in nine places, a
 * flow that is nought at rest). Holds MAX_LEVELS values; a new one takes the place of the rarest, and at each such change
 * old counts fade, so that a channel that never comes back to a value keeps a table that says little.
 */

const MAX_LEVELS = 16;
/** A level's count after any level, as a share of a count after this very one. */
const OVERALL_SHARE = 1;

/** What is left of every overall count when a new value comes into a full table. */
const FADE = 0.98;

/** Counts of which level followed which, for channels that only ever show a few. */
export class LevelTable {
  /** In no order. */
  readonly #levels = new Float64Array(MAX_LEVELS);
  /** Row: level before, column: level after. */
  readonly #counts = new Float64Array(MAX_LEVELS * MAX_LEVELS);
  readonly #overall = new Float64Array(MAX_LEVELS);
  /** Probability of each level next, as `prepare` left it. */
  readonly #mass = new Float64Array(MAX_LEVELS);
  #count = 0;

  /** Readies the probabilities of the next index after `last`; false when the table has nothing to say. */
  prepare(last: number): boolean {
    if (this.#count === 0) return false;
    const from = this.#find(last);
    let overall = 0;
    let total = 0;
    for (let i = 0; i < this.#count; i++) {
      overall += this.#overall[i]!;
      if (from >= 0) total += this.#counts[from * MAX_LEVELS + i]!;
    }
    total += OVERALL_SHARE;
    for (let i = 0; i < this.#count; i++) {
      const seen = from >= 0 ? this.#counts[from * MAX_LEVELS + i]! : 0;
      this.#mass[i] = (seen + (OVERALL_SHARE * this.#overall[i]!) / overall) / total;
    }
    return true;
  }

  /** Probability that sign × index ≥ x. */
  tail(sign: number, x: number): number {
    let sum = 0;
    for (let i = 0; i < this.#count; i++) if (sign * this.#levels[i]! >= x) sum += this.#mass[i]!;
    return sum;
  }

  /** Probability of exactly `index`. */
  massOf(index: number): number {
    const at = this.#find(index);
    return at >= 0 ? this.#mass[at]! : 0;
  }

  /** Counts `index` after `last`. */
  learn(last: number, index: number): void {
    const to = this.#findOrAdd(index);
    this.#overall[to]!++;
    const from = this.#find(last);
    if (from >= 0) this.#counts[from * MAX_LEVELS + to]!++;
  }

  #find(index: number): number {
    for (let i = 0; i < this.#count; i++) if (this.#levels[i] === index) return i;
    return -1;
  }

  /** Clears the rarest level and gives its place. */
  #evict(): number {
    let least = 0;
    for (let i = 1; i < MAX_LEVELS; i++) if (this.#overall[i]! < this.#overall[least]!) least = i;
    for (let i = 0; i < MAX_LEVELS; i++) {
      this.#counts[least * MAX_LEVELS + i] = 0;
      this.#counts[i * MAX_LEVELS + least] = 0;
      this.#overall[i]! *= FADE;
    }
    this.#overall[least] = 0;
    return least;
  }

  #findOrAdd(index: number): number {
    const found = this.#find(index);
    if (found >= 0) return found;
    const at = this.#count < MAX_LEVELS ? this.#count++ : this.#evict();
    this.#levels[at] = index;
    return at;
  }
}
