/**
 * Forecasts from the state: the path of the kind's kernel, faded and clipped. A signal without readings for longer than F =
 * fadeTicks fades to its seasonal mean: with `age` the ticks since its last reading, the distance to that mean keeps its
 * size up to age F and falls linearly to nothing at age 2F, because iterating a fitted recursion without readings need
 * not be stable. Step 1 of the path is the number that stands in for a missing reading at the next tick, but for a signal that
 * stands still: its path leans on the standing reading (repeats.ts), its stand-in does not.
 */
import { kernelOf } from './kernels.ts';
import type { CommonModel, Model } from './model.ts';
import { leanOnStanding } from './repeats.ts';
import { respond } from './response.ts';
import { addRound } from './round.ts';
import { type FilterState, fadeTicks } from './state.ts';

/**
 * Fades and clips a path of every signal, in place.
 *
 * shapes  paths (ny × steps)
 * units   standardised
 * cost    O(ny · steps); allocates nothing
 */
function finish(model: Model, state: FilterState, steps: number, paths: Float64Array): void {
  for (let i = 0; i < model.signalCount; i++) {
    const at = i * steps;
    if (state.age[i] + steps > fadeTicks(model)) fade(model, state, i, steps, paths, at);
    const low = state.low[i];
    const high = state.high[i];
    for (let k = at; k < at + steps; k++) {
      if (paths[k] < low) paths[k] = low;
      else if (paths[k] > high) paths[k] = high;
    }
  }
}

/** Leaves, of the distance to the seasonal mean, the share that belongs to the age of each step; see the file head. */
function fade(
  model: CommonModel,
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
function seasonalCell(model: CommonModel, signal: number, tick: number): number {
  const { seasonalPeriod: period, seasonalBins: bins } = model;
  if (period === 0) return signal * bins;
  return signal * bins + Math.floor(((tick % period) * bins) / period);
}

/** Turns standardised numbers of one channel into its unit, in place, inside the clips to the last bit. */
function toUnits(model: CommonModel, channel: number, values: Float64Array, at: number, count: number): void {
  const mean = model.mean[channel];
  const scale = model.scale[channel];
  const low = model.clipLow[channel];
  const high = model.clipHigh[channel];
  for (let k = at; k < at + count; k++) values[k] = Math.min(high, Math.max(low, mean + scale * values[k]));
}

/**
 * Forecast path of every signal.
 *
 * shapes  median (ny × H), row-major: step h at i·H + h − 1; plan (nu × H), NaN where an input is not planned
 * units   median of the signal; plan standardised
 * cost    that of the kind's kernel; allocates nothing
 */
export function forecastPath(
  model: Model,
  state: FilterState,
  median: Float64Array,
  plan: Float64Array | null = null,
): void {
  const H = model.horizon;
  kernelOf(model).paths(model, state.core, state, H, plan, median);
  if (model.round !== undefined) addRound(model, model.round, state, H, median);
  if (plan !== null && model.response !== undefined && state.response !== null)
    respond(model, model.response, state.response, state, plan, median);
  finish(model, state, H, median);
  if (model.stuck?.acts === true) leanOnStanding(model, state, H, median);
  for (let i = 0; i < model.signalCount; i++) toUnits(model, i, median, i * H, H);
}

/**
 * One-step forecast of every channel: signals by the model, inputs by their last value. Before the first tick, the mean.
 * Never by a plan: the desk repeats these numbers from the readings alone.
 *
 * shapes  out (nc)
 * units   standardised
 * cost    that of the kind's kernel; allocates nothing
 */
export function predictStandardised(model: Model, state: FilterState, out: Float64Array): void {
  if (state.tick < 0) {
    out.fill(0);
    return;
  }
  kernelOf(model).paths(model, state.core, state, 1, null, out);
  if (model.round !== undefined) addRound(model, model.round, state, 1, out);
  finish(model, state, 1, out);
  for (let c = model.signalCount; c < model.channelCount; c++) out[c] = state.value[c];
}

/**
 * Forecast of the next tick for every channel: signals by the model, the same number as step 1 of the path without a plan
 * unless the signal stands still; inputs by their last value. What a missing reading will be replaced by.
 *
 * shapes  out (nc)
 * units   of the channel
 * cost    that of the kind's kernel; allocates nothing
 */
export function predictNext(model: Model, state: FilterState, out: Float64Array): void {
  predictStandardised(model, state, out);
  for (let c = 0; c < model.channelCount; c++) toUnits(model, c, out, c, 1);
}
