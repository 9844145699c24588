/**
 * What the channels' residuals say of one another: within a tick (what hits one pump hits its neighbour's pressure) and
 * from the tick before. Keeps second moments of [residuals one tick ago, residuals now], standardised, and factors them
 * once a tick; row by row the factor gives each residual's regression on all that is known before it, and on nothing
 * else, because a Cholesky factor conditions in order (Golub and Van Loan, Matrix Computations, 4.2). Ridge at the start,
 * so that a short segment is not misled.
 *
 * Only + - × ÷ √ on float64 in a fixed order, as in the filter: the same bits everywhere, under its arithmetic version.
 */

/** Channels regressed together; further ones form the next group, or the cost a value would grow with their square. */
export const GROUP = 16;

const FORGET = 0.998;
const RIDGE_NOW = 1;
const RIDGE_BEFORE = 20;
/** Standardised residuals are clipped here: one wild reading must not own the moments. */
const CLIP = 20;
/** Least share of a residual's variance taken to be its own. */
const OWN_SHARE = 1e-3;

/** Regression of each channel's residual on the others' at this tick and all of them at the last, kept up to date by moments. */
export class CrossRegression {
  readonly #count: number;
  readonly #size: number;
  readonly #moments: Float64Array;
  readonly #factor: Float64Array;
  readonly #residual: Float64Array;
  readonly #white: Float64Array;

  /** `count` channels, at most GROUP. */
  constructor(count: number) {
    this.#count = count;
    this.#size = 2 * count;
    this.#moments = new Float64Array(this.#size * this.#size);
    this.#factor = new Float64Array(this.#size * this.#size);
    this.#residual = new Float64Array(this.#size);
    this.#white = new Float64Array(this.#size);
    for (let i = 0; i < this.#size; i++) this.#moments[i * this.#size + i] = this.#ridge(i);
  }

  /** Starts a tick: last tick's residuals move back, the moments are factored. Cost (2 count)³ / 6. */
  begin(): void {
    const n = this.#count;
    const m = this.#size;
    const L = this.#factor;
    this.#factorise();
    for (let i = 0; i < n; i++) {
      this.#residual[i] = this.#residual[i + n]!;
      let rest = this.#residual[i]!;
      for (let k = 0; k < i; k++) rest -= L[i * m + k]! * this.#white[k]!;
      this.#white[i] = rest / L[i * m + i]!;
    }
  }

  /** Expected standardised residual of a channel, given the tick before and the channels already observed in this one. */
  expected(channel: number): number {
    const row = this.#count + channel;
    const start = row * this.#size;
    let sum = 0;
    for (let k = 0; k < row; k++) sum += this.#factor[start + k]! * this.#white[k]!;
    return clip(sum);
  }

  /** Takes a channel's standardised residual; NaN where it is missing, which then counts as just what was expected. */
  observe(channel: number, residual: number, expected: number): void {
    const row = this.#count + channel;
    const value = Number.isNaN(residual) ? expected : clip(residual);
    this.#residual[row] = value;
    this.#white[row] = (value - expected) / this.#factor[row * this.#size + row]!;
  }

  /** Ends a tick: its products join the moments. */
  end(): void {
    const m = this.#size;
    const e = this.#residual;
    const S = this.#moments;
    for (let i = 0; i < m; i++) {
      const start = i * m;
      const ei = e[i]!;
      for (let j = 0; j <= i; j++) S[start + j] = S[start + j]! * FORGET + ei * e[j]!;
      S[start + i]! += (1 - FORGET) * this.#ridge(i);
    }
  }

  #ridge(row: number): number {
    return row < this.#count ? RIDGE_BEFORE : RIDGE_NOW;
  }

  /** Row-wise Cholesky; a pivot is kept above its own share, so that equal channels do no harm. */
  #factorise(): void {
    const m = this.#size;
    const S = this.#moments;
    const L = this.#factor;
    for (let i = 0; i < m; i++) {
      const ri = i * m;
      for (let j = 0; j < i; j++) {
        const rj = j * m;
        let sum = S[ri + j]!;
        for (let k = 0; k < j; k++) sum -= L[ri + k]! * L[rj + k]!;
        L[ri + j] = sum / L[rj + j]!;
      }
      let own = S[ri + i]!;
      const least = OWN_SHARE * own;
      for (let k = 0; k < i; k++) own -= L[ri + k]! * L[ri + k]!;
      L[ri + i] = Math.sqrt(Math.max(own, least));
    }
  }
}

function clip(value: number): number {
  return value > CLIP ? CLIP : Math.max(value, -CLIP);
}
