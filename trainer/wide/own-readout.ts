/**
 * Forecasts of many numbers from a few states and each number's own newest value, by plain regression: where the scene moves on
 * from what it is, the newest value is worth most and the states tell the change; where it goes round, the states tell all. The
 * regression finds where between the two each number lies.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';

/** Part of the mean state's energy added to each, so that a state that never moved stays finite. */
const LEAST_RIDGE = 1e-9;
/** A newest value that states explain but for this part of its energy adds nothing of its own. */
const LEAST_OWN = 1e-9;

/** ŷ(t+h) = F x + a·y(t), number by number. */
export interface OwnForecast {
  /** F (steps · outputs × states). */
  readonly forecastMap: Float64Array;
  /** a (steps · outputs). */
  readonly own: Float64Array;
}

/** The regression, row by row. */
export class OwnReadout {
  readonly #states: number;
  readonly #outputs: number;
  readonly #steps: number;
  /** Sums of products: states with states, newest and future; each newest with itself and its own future. */
  readonly #xx: Float64Array;
  readonly #xy: Float64Array;
  readonly #xf: Float64Array;
  readonly #yy: Float64Array;
  readonly #yf: Float64Array;
  readonly #ff: Float64Array;

  constructor(states: number, outputs: number, steps: number) {
    this.#states = states;
    this.#outputs = outputs;
    this.#steps = steps;
    this.#xx = new Float64Array(states * states);
    this.#xy = new Float64Array(states * outputs);
    this.#xf = new Float64Array(states * outputs * steps);
    this.#yy = new Float64Array(outputs);
    this.#yf = new Float64Array(outputs * steps);
    this.#ff = new Float64Array(outputs * steps);
  }

  /** Takes a state (states), the newest values (outputs) and what came after them (steps × outputs). */
  add(x: ArrayLike<number>, newest: ArrayLike<number>, future: ArrayLike<number>): void {
    const [d, n] = [this.#states, this.#outputs];
    const m = n * this.#steps;
    for (let i = 0; i < d; i++) {
      const xi = x[i];
      for (let j = 0; j < d; j++) this.#xx[i * d + j] += xi * x[j];
      for (let j = 0, at = i * n; j < n; j++, at++) this.#xy[at] += xi * newest[j];
      for (let j = 0, at = i * m; j < m; j++, at++) this.#xf[at] += xi * future[j];
    }
    for (let j = 0; j < n; j++) this.#yy[j] += newest[j] * newest[j];
    for (let c = 0, j = 0; c < m; c++, j = j + 1 === n ? 0 : j + 1) {
      this.#yf[c] += newest[j] * future[c];
      this.#ff[c] += future[c] * future[c];
    }
  }

  /**
   * The forecasts of least squared error from the first states.
   *
   * shapes  as OwnForecast, of `order` states, 0 for the newest values alone
   * units   those of what was added
   * throws  TrainError 'fit' where numbers are not finite
   * source  Frisch and Waugh, Econometrica 1 (1933): the newest value's part from what the states leave of it
   * cost    O(order² (order + steps · outputs))
   */
  solve(order = this.#states): OwnForecast {
    const n = this.#outputs;
    const m = n * this.#steps;
    const d = order;
    const factor = this.#factor(d);
    const [byState, ofNewest] = [this.#xf.slice(0, d * m), this.#xy.slice(0, d * n)];
    if (d > 0) {
      solveCholesky(factor, d, byState, m);
      solveCholesky(factor, d, ofNewest, n);
    }
    const own = new Float64Array(m);
    const forecastMap = new Float64Array(m * d);
    for (let c = 0; c < m; c++) {
      const j = c % n;
      let left = this.#yy[j];
      let joint = this.#yf[c];
      for (let k = 0; k < d; k++) {
        left -= ofNewest[k * n + j] * this.#xy[k * n + j];
        joint -= ofNewest[k * n + j] * this.#xf[k * m + c];
      }
      own[c] = left > LEAST_OWN * this.#yy[j] ? joint / left : 0;
      for (let k = 0; k < d; k++) forecastMap[c * d + k] = byState[k * m + c] - own[c] * ofNewest[k * n + j];
    }
    return { forecastMap, own };
  }

  /**
   * Sum of squared errors that forecasts from the first states would have made on the rows added here; `energy` without any.
   *
   * shapes  as `solve` gives them for `order` states
   * units   squares of those of what was added
   * throws  nothing
   * source  definition, expanded
   * cost    O(order² steps · outputs)
   */
  errorOf({ forecastMap, own }: OwnForecast, order: number): number {
    const [all, n] = [this.#states, this.#outputs];
    const m = n * this.#steps;
    let sum = 0;
    for (let c = 0; c < m; c++) {
      const j = c % n;
      const a = own[c];
      sum += this.#ff[c] - 2 * a * this.#yf[c] + a * a * this.#yy[j];
      for (let i = 0; i < order; i++) {
        const f = forecastMap[c * order + i];
        let known = 0;
        for (let k = 0; k < order; k++) known += this.#xx[i * all + k] * forecastMap[c * order + k];
        sum += f * (known + 2 * a * this.#xy[i * n + j] - 2 * this.#xf[i * m + c]);
      }
    }
    return sum;
  }

  /** Sum of squares of what came. */
  get energy(): number {
    return this.#ff.reduce((sum, value) => sum + value, 0);
  }

  /** Factor of the first states' energy. */
  #factor(d: number): Float64Array {
    const all = this.#states;
    const energy = new Float64Array(d * d);
    let trace = 0;
    for (let i = 0; i < d; i++) {
      for (let k = 0; k < d; k++) energy[i * d + k] = this.#xx[i * all + k];
      trace += energy[i * d + i];
    }
    for (let k = 0; k < d; k++) energy[k * d + k] += (LEAST_RIDGE * trace) / d + Number.MIN_VALUE;
    return d > 0 ? cholesky(energy, d) : energy;
  }
}
