/**
 * A few earlier forecasts, to be seen beside what then came: one a horizon, so that they lie end to end. Bounded: of a long
 * horizon only some steps are kept, and never more than a handful of forecasts.
 */
import type { Serving } from '../serving.ts';

/** One forecast as it was issued; arrays are (signals × steps) in units. */
export interface SaidForecast {
  readonly tick: number;
  readonly sequence: number;
  /** Steps kept, rising; the last is the horizon. */
  readonly steps: readonly number[];
  readonly median: Float32Array;
  readonly lower: Float32Array;
  readonly upper: Float32Array;
}

/** Horizons of the past that are shown. */
export const PAST_HORIZONS = 3;
const MOST_STEPS = 96;

/** See the file head. */
export class SaidBefore {
  #kept: SaidForecast[] = [];

  /** Oldest first. */
  get kept(): readonly SaidForecast[] {
    return this.#kept;
  }

  /** Keeps the forecast of a tick if the one kept last has run its course. */
  take(serving: Serving): void {
    const { tick, model } = serving;
    const newest = this.#kept.at(-1);
    // A clock put right may set the ticks back; what was said of them is then of another time.
    if (newest !== undefined && tick < newest.tick) this.#kept = [];
    if (newest !== undefined && tick >= newest.tick && tick < newest.tick + model.horizon) return;
    const oldest = tick - (PAST_HORIZONS + 1) * model.horizon;
    this.#kept = this.#kept.filter((one) => one.tick > oldest).slice(-PAST_HORIZONS);
    serving.computeBounds();
    const steps = stepsKept(model.horizon);
    const thin = (path: Float64Array): Float32Array => {
      const out = new Float32Array(model.signalCount * steps.length);
      for (let i = 0; i < model.signalCount; i++)
        for (let k = 0; k < steps.length; k++) out[i * steps.length + k] = path[i * model.horizon + steps[k]! - 1]!;
      return out;
    };
    this.#kept.push({
      tick,
      sequence: serving.checked.sequence,
      steps,
      median: thin(serving.median),
      lower: thin(serving.lower),
      upper: thin(serving.upper),
    });
  }
}

/** All steps of a short horizon, else every so many-th and the last. */
export function stepsKept(horizon: number): number[] {
  const stride = Math.ceil(horizon / MOST_STEPS);
  const steps: number[] = [];
  for (let step = stride; step < horizon; step += stride) steps.push(step);
  return [...steps, horizon];
}
