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

  constructor(states: number, outputs: number, steps: number) {
    this.#states = states;
    this.#outputs = outputs;
    this.#steps = steps;
    this.#xx = new Float64Array(states * states);
    this.#xy = new Float64Array(states * outputs);
    this.#xf = new Float64Array(states * outputs * steps);
    this.#yy = new Float64Array(outputs);
    this.#yf = new Float64Array(outputs * steps);
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
    for (let c = 0, j = 0; c < m; c++, j = j + 1 === n ? 0 : j + 1) this.#yf[c] += newest[j] * future[c];
  }

  /**
   * The forecasts of least squared error.
   *
   * shapes  as OwnForecast
   * units   those of what was added
   * throws  TrainError 'fit' where numbers are not finite
   * source  Frisch and Waugh, Econometrica 1 (1933): the newest value's part from what the states leave of it
   * cost    O(states² (states + steps · outputs))
   */
  solve(): OwnForecast {
    const [d, n] = [this.#states, this.#outputs];
    const m = n * this.#steps;
    const energy = this.#xx.slice();
    let trace = 0;
    for (let k = 0; k < d; k++) trace += energy[k * d + k];
    for (let k = 0; k < d; k++) energy[k * d + k] += (LEAST_RIDGE * trace) / d + Number.MIN_VALUE;
    const factor = cholesky(energy, d);
    const [byState, ofNewest] = [this.#xf.slice(), this.#xy.slice()];
    solveCholesky(factor, d, byState, m);
    solveCholesky(factor, d, ofNewest, n);
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
}
