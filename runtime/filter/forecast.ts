/**
 * Forecasts from the state: z(t+h) = z(t) + Σ_k B[h−1, k] coefficient k. A signal without readings for longer than the
 * horizon H fades to its seasonal mean: with `age` the ticks since its last reading, the distance to that mean keeps its
 * size up to age H and falls linearly to nothing at age 2H, because iterating a fitted recursion without readings need
 * not be stable. Step 1 of the path is the number that stands in for a missing reading at the next tick.
 */
import { dot } from './dense.ts';
import type { LinearModel } from './model.ts';
import type { FilterState } from './state.ts';

/**
 * Mean of a signal at a tick by its phase in the period.
 *
 * units  standardised
 */
export function seasonalMean(model: LinearModel, signal: number, tick: number): number {
  const period = model.seasonalPeriod;
  const at = signal * model.seasonalBins;
  if (period === 0) return model.seasonal[at];
  const phase = tick % period;
  return model.seasonal[at + Math.floor(((phase < 0 ? phase + period : phase) * model.seasonalBins) / period)];
}

/**
 * Forecast of one signal `step` ticks ahead, clipped.
 *
 * units  standardised
 * cost   O(r); allocates nothing
 */
export function stepAhead(model: LinearModel, state: FilterState, signal: number, step: number): number {
  const r = model.basisCount;
  let z = state.value[signal] + dot(model.horizonBasis, (step - 1) * r, state.coefficients, signal * r, r);
  const age = state.age[signal];
  if (age + step > model.horizon) {
    const mean = seasonalMean(model, signal, state.tick + step);
    z = mean + keptDistance(model.horizon, age, step) * (z - mean);
  }
  if (z < state.low[signal]) return state.low[signal];
  if (z > state.high[signal]) return state.high[signal];
  return z;
}

/** Share of the distance to the seasonal mean at `age` that is left `step` ticks later; 1 up to the horizon, 0 from twice it. */
function keptDistance(horizon: number, age: number, step: number): number {
  const end = 2 * horizon;
  if (age >= end) return 0;
  const later = Math.min(end, Math.max(horizon, age + step));
  return (end - later) / (end - Math.max(horizon, age));
}

/**
 * From standardised to the signal's unit, inside the clips to the last bit.
 *
 * units  z standardised; the result in units of the channel
 */
export function inUnits(model: LinearModel, channel: number, z: number): number {
  const y = model.mean[channel] + model.scale[channel] * z;
  return Math.min(model.clipHigh[channel], Math.max(model.clipLow[channel], y));
}

/**
 * Forecast path of every signal.
 *
 * shapes  median (ny × H), row-major: step h at i·H + h − 1
 * units   of the signal
 * cost    O(ny · H · r); allocates nothing
 */
export function forecastPath(model: LinearModel, state: FilterState, median: Float64Array): void {
  const H = model.horizon;
  for (let i = 0; i < model.signalCount; i++) {
    for (let h = 1; h <= H; h++) median[i * H + h - 1] = inUnits(model, i, stepAhead(model, state, i, h));
  }
}

/**
 * Forecast of the next tick for every channel: signals by the model, the same number as step 1 of the path; inputs by
 * their last value. What a missing reading will be replaced by.
 *
 * shapes  out (nc)
 * units   of the channel
 * cost    O(ny · r); allocates nothing
 */
export function predictNext(model: LinearModel, state: FilterState, out: Float64Array): void {
  const ny = model.signalCount;
  for (let i = 0; i < ny; i++) out[i] = inUnits(model, i, stepAhead(model, state, i, 1));
  for (let c = ny; c < model.channelCount; c++) out[c] = inUnits(model, c, state.value[c]);
}
