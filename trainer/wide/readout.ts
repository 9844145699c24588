/**
 * The readout of a state by plain regression on what came: exact moments of the few states, gathered in one more pass, in place
 * of what the truncated factors say of them. Factors of joint rows keep some directions that are nearly all future; the little
 * past these hold seems to tell that future, and a regression within the factors believes it.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';

/** Part of the mean state's energy added to each, so that a state that never moved stays finite. */
const LEAST_RIDGE = 1e-9;

/** Regression of several numbers on a few states, row by row. */
export class ReadoutRegression {
  readonly #states: number;
  readonly #targets: number;
  /** (states × states) and (states × targets) sums of products. */
  readonly #energy: Float64Array;
  readonly #joint: Float64Array;

  constructor(states: number, targets: number) {
    this.#states = states;
    this.#targets = targets;
    this.#energy = new Float64Array(states * states);
    this.#joint = new Float64Array(states * targets);
  }

  /** Takes one state and what came after it. */
  add(x: ArrayLike<number>, target: ArrayLike<number>): void {
    const d = this.#states;
    const m = this.#targets;
    for (let i = 0; i < d; i++) {
      const xi = x[i];
      for (let j = 0; j < d; j++) this.#energy[i * d + j] += xi * x[j];
      for (let j = 0, at = i * m; j < m; j++, at++) this.#joint[at] += xi * target[j];
    }
  }

  /**
   * The readout.
   *
   * shapes  (targets × states)
   * units   target for a unit of state
   * throws  TrainError 'fit' where states are not finite
   * source  normal equations by Cholesky factor
   * cost    O(states² (states + targets))
   */
  solve(): Float64Array {
    const d = this.#states;
    const m = this.#targets;
    const energy = this.#energy.slice();
    let trace = 0;
    for (let k = 0; k < d; k++) trace += energy[k * d + k];
    for (let k = 0; k < d; k++) energy[k * d + k] += (LEAST_RIDGE * trace) / d + Number.MIN_VALUE;
    const solved = this.#joint.slice();
    solveCholesky(cholesky(energy, d), d, solved, m);
    const out = new Float64Array(m * d);
    for (let k = 0; k < d; k++) for (let j = 0; j < m; j++) out[j * d + k] = solved[k * m + j];
    return out;
  }
}
