/**
 * Forecasts from the state: z(t+h) = z(t) + Σ_k B[h−1, k] coefficient k. A signal without readings for longer than F =
 * fadeTicks fades to its seasonal mean: with `age` the ticks since its last reading, the distance to that mean keeps its
 * size up to age F and falls linearly to nothing at age 2F, because iterating a fitted recursion without readings need
 * not be stable. Step 1 of the path is the number that stands in for a missing reading at the next tick.
 */
import { multiply } from './dense.ts';
import type { LinearModel } from './model.ts';
import { type FilterState, fadeTicks } from './state.ts';

/**
 * Forecasts of one signal for steps 1 … `steps`, faded and clipped.
 *
 * shapes  out, `steps` numbers from `at`
 * units   standardised
 * cost    O(steps · r); allocates nothing
 */
export function stepsAhead(
  model: LinearModel,
  state: FilterState,
  signal: number,
  steps: number,
  out: Float64Array,
  at: number,
): void {
  const r = model.basisCount;
  multiply(model.horizonBasis, steps, r, state.coefficients, signal * r, out, at);
  const now = state.value[signal];
  for (let h = 0; h < steps; h++) out[at + h] = now + out[at + h];
  if (state.age[signal] + steps > fadeTicks(model)) fade(model, state, signal, steps, out, at);
  const low = state.low[signal];
  const high = state.high[signal];
  for (let h = 0; h < steps; h++) {
    if (out[at + h] < low) out[at + h] = low;
    else if (out[at + h] > high) out[at + h] = high;
  }
}

/** Leaves, of the distance to the seasonal mean, the share that belongs to the age of each step; see the file head. */
function fade(
  model: LinearModel,
  state: FilterState,
  signal: number,
  steps: number,
  out: Float64Array,
  at: number,
): void {
  const F = fadeTicks(model);
  const end = 2 * F;
  const age = state.age[signal];
  const left = end - Math.max(F, age);
  for (let h = 1; h <= steps; h++) {
    if (age + h <= F) continue;
    const mean = model.seasonal[seasonalCell(model, signal, state.tick + h)];
    // The state has itself been faded up to `age`: only what is lost since counts.
    const kept = left === 0 ? 0 : Math.max(0, end - (age + h)) / left;
    out[at + h - 1] = mean + kept * (out[at + h - 1] - mean);
  }
}

/** Place in the seasonal table of a signal at a tick, by the tick's phase in the period. */
function seasonalCell(model: LinearModel, signal: number, tick: number): number {
  const { seasonalPeriod: period, seasonalBins: bins } = model;
  if (period === 0) return signal * bins;
  return signal * bins + Math.floor(((tick % period) * bins) / period);
}

/** Turns standardised numbers of one channel into its unit, in place, inside the clips to the last bit. */
function toUnits(model: LinearModel, channel: number, values: Float64Array, at: number, count: number): void {
  const mean = model.mean[channel];
  const scale = model.scale[channel];
  const low = model.clipLow[channel];
  const high = model.clipHigh[channel];
  for (let k = at; k < at + count; k++) values[k] = Math.min(high, Math.max(low, mean + scale * values[k]));
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
    stepsAhead(model, state, i, H, median, i * H);
    toUnits(model, i, median, i * H, H);
  }
}

/**
 * One-step forecast of every channel: signals by the model, inputs by their last value. Before the first tick, the mean.
 *
 * shapes  out (nc)
 * units   standardised
 * cost    O(ny · r); allocates nothing
 */
export function predictStandardised(model: LinearModel, state: FilterState, out: Float64Array): void {
  if (state.tick < 0) {
    out.fill(0);
    return;
  }
  for (let i = 0; i < model.signalCount; i++) stepsAhead(model, state, i, 1, out, i);
  for (let c = model.signalCount; c < model.channelCount; c++) out[c] = state.value[c];
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
  predictStandardised(model, state, out);
  for (let c = 0; c < model.channelCount; c++) toUnits(model, c, out, c, 1);
}
