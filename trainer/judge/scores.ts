/**
 * Sums behind every score, one cell a signal and step. A pair of forecast and reading counts only where the reading is
 * there; the same pairs count for the model and for every rival.
 */

/** Running sums; entry i·H + h - 1. */
export class Scores {
  readonly count: Float64Array;
  readonly #squares: Float64Array;
  readonly #sizes: Float64Array;
  readonly #sum: Float64Array;

  constructor(cells: number) {
    this.count = new Float64Array(cells);
    this.#squares = new Float64Array(cells);
    this.#sizes = new Float64Array(cells);
    this.#sum = new Float64Array(cells);
  }

  /** Adds one error, forecast minus reading. */
  add(cell: number, error: number): void {
    this.count[cell]++;
    this.#squares[cell] += error * error;
    this.#sizes[cell] += Math.abs(error);
    this.#sum[cell] += error;
  }

  /** Adds the errors of a path, NaN where no reading came, from cell `first` on. */
  addErrors(first: number, errors: Float64Array): void {
    for (let h = 0; h < errors.length; h++) if (!Number.isNaN(errors[h])) this.add(first + h, errors[h]);
  }

  /**
   * Adds the errors of a path of `steps` forecasts, first at `path[at]` and its reading at `readings[from]`, from cell `first`
   * on; gives their mean square, NaN where no reading came.
   */
  addPath(first: number, path: Float64Array, at: number, readings: Float64Array, from: number, steps: number): number {
    const count = this.count;
    const squares = this.#squares;
    const sizes = this.#sizes;
    const sums = this.#sum;
    let total = 0;
    let read = 0;
    for (let h = 0; h < steps; h++) {
      const error = path[at + h] - readings[from + h];
      if (Number.isNaN(error)) continue;
      const cell = first + h;
      const square = error * error;
      count[cell]++;
      squares[cell] += square;
      sizes[cell] += Math.abs(error);
      sums[cell] += error;
      total += square;
      read++;
    }
    return read > 0 ? total / read : Number.NaN;
  }

  /** Mean squared error; NaN where nothing was counted. */
  mse(): Float64Array {
    return this.#squares.map((sum, cell) => sum / this.count[cell]);
  }

  /** Mean absolute error. */
  mae(): Float64Array {
    return this.#sizes.map((sum, cell) => sum / this.count[cell]);
  }

  /** Mean error: positive where forecasts are too high. */
  bias(): Float64Array {
    return this.#sum.map((sum, cell) => sum / this.count[cell]);
  }
}

/**
 * Skill score 1 - ours/theirs: 0 is no better, 1 is perfect, negative is worse.
 *
 * Where the rival makes no error at all there is nothing to gain: 0 if ours makes none either, otherwise -1.
 */
export function skillScore(ours: number, theirs: number): number {
  if (theirs > 0) return 1 - ours / theirs;
  if (Number.isNaN(theirs) || Number.isNaN(ours)) return Number.NaN;
  return ours > 0 ? -1 : 0;
}

/** Mean of the cells from..to-1 that hold a number; NaN where none does. */
export function meanOf(values: Float64Array, from = 0, to = values.length): number {
  let sum = 0;
  let count = 0;
  for (let k = from; k < to; k++) {
    if (Number.isNaN(values[k])) continue;
    sum += values[k];
    count++;
  }
  return count > 0 ? sum / count : Number.NaN;
}
