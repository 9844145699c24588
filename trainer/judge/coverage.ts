/**
 * How often readings fell inside the bounds, and how wide those were; and the half-widths that calibration asks for.
 */
import { smallest } from '../history/order-statistics.ts';

/** Running coverage and width; entry i·H + h - 1. */
export class Coverage {
  readonly #count: Float64Array;
  readonly #inside: Float64Array;
  readonly #width: Float64Array;

  constructor(cells: number) {
    this.#count = new Float64Array(cells);
    this.#inside = new Float64Array(cells);
    this.#width = new Float64Array(cells);
  }

  /**
   * Adds a path's: bounds from `first` on, readings from `readings[from]` on, those that did not come left out; one on a bound
   * is inside.
   */
  addPath(
    first: number,
    readings: Float64Array,
    from: number,
    lower: Float64Array,
    upper: Float64Array,
    steps: number,
  ): void {
    const count = this.#count;
    const inside = this.#inside;
    const width = this.#width;
    for (let h = 0; h < steps; h++) {
      const reading = readings[from + h];
      if (Number.isNaN(reading)) continue;
      const cell = first + h;
      count[cell]++;
      width[cell] += upper[cell] - lower[cell];
      if (reading >= lower[cell] && reading <= upper[cell]) inside[cell]++;
    }
  }

  /** Share inside; NaN where nothing was counted. */
  share(): Float64Array {
    return this.#inside.map((inside, cell) => inside / this.#count[cell]);
  }

  /** Mean width in the signal's unit. */
  width(): Float64Array {
    return this.#width.map((sum, cell) => sum / this.#count[cell]);
  }
}

/**
 * Half-width that holds the stated share of future errors, from errors of the past. Errors at a long step repeat themselves
 * from tick to tick and their size drifts; the fewer of them stand for themselves, the further out the half-width is taken.
 * A margin, and on the safe side where nothing drifts.
 *
 * shapes  sizes (n) absolute errors, moved about; independent: how many of them stand for themselves
 * units   as the errors
 * throws  nothing; the caller gives at least one
 * source  split conformal prediction, the ⌈(n + 1) coverage⌉-th smallest: Papadopoulos and others, ECML (2002); blocks in
 *         place of single errors: Chernozhukov, Wüthrich & Zhu, COLT (2018), of which only the count is taken
 * cost    O(n) on average
 */
export function conformalRadius(sizes: Float64Array, coverage: number, independent = sizes.length): number {
  const share = (1 + 1 / independent) * coverage;
  return smallest(sizes, Math.min(sizes.length, Math.ceil(sizes.length * share)) - 1);
}
