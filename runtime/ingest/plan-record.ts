/**
 * How far a plan and what then came differed. Of what is planned, a window is kept every eighth of a horizon, and every
 * tick that comes is held against all of them: so a plan that is right for the next tick alone, because it is corrected
 * every tick, does not look right.
 */

const WINDOWS = 8;

interface Window {
  tick: number;
  readonly planned: Float64Array;
  /** Value when it was kept. */
  held: number;
  sum: number;
  heldSum: number;
  count: number;
}

/** The record of one input; see the file head. */
export class PlanRecord {
  readonly #horizon: number;
  readonly #stride: number;
  readonly #windows: Window[];
  #last = Number.NaN;

  constructor(horizon: number) {
    this.#horizon = horizon;
    this.#stride = Math.max(1, Math.ceil(horizon / WINDOWS));
    this.#windows = Array.from({ length: WINDOWS }, () => ({
      tick: Number.NEGATIVE_INFINITY,
      planned: new Float64Array(horizon),
      held: Number.NaN,
      sum: 0,
      heldSum: 0,
      count: 0,
    }));
  }

  /** What came at a tick, in the input's unit, NaN where nothing did. */
  came(tick: number, value: number): void {
    if (Number.isNaN(value)) return;
    this.#last = value;
    for (const window of this.#windows) {
      const ahead = tick - window.tick;
      if (!(ahead >= 1 && ahead <= this.#horizon)) continue;
      const planned = window.planned[ahead - 1]!;
      if (Number.isNaN(planned)) continue;
      window.sum += Math.abs(planned - value);
      window.heldSum += Math.abs(window.held - value);
      window.count++;
    }
  }

  /** What is planned from the tick after `tick` on, H values from `at`, NaN where nothing is. */
  planned(tick: number, values: Float64Array, at: number): void {
    const newest = this.#windows.reduce((best, one) => (one.tick > best.tick ? one : best));
    if (tick - newest.tick < this.#stride) return;
    const oldest = this.#windows.reduce((best, one) => (one.tick < best.tick ? one : best));
    oldest.tick = tick;
    oldest.planned.set(values.subarray(at, at + this.#horizon));
    oldest.held = this.#last;
    oldest.sum = 0;
    oldest.heldSum = 0;
    oldest.count = 0;
  }

  /** Pairs of planned and come behind `error`. */
  get count(): number {
    return this.#windows.reduce((sum, window) => sum + window.count, 0);
  }

  /** Mean size of plan less what came, over the last horizon, in the input's unit; null where nothing was planned and came. */
  get error(): number | null {
    return this.#mean((window) => window.sum);
  }

  /** The same of the value when the plan was kept, had that been held instead of the plan. */
  get heldError(): number | null {
    const mean = this.#mean((window) => window.heldSum);
    return Number.isNaN(mean) ? null : mean;
  }

  #mean(sumOf: (window: Window) => number): number | null {
    const { count } = this;
    if (count === 0) return null;
    return this.#windows.reduce((sum, window) => sum + (window.count > 0 ? sumOf(window) : 0), 0) / count;
  }
}
