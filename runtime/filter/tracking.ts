/**
 * Moves the bounds by what came of the forecasts: a reading outside widens the radius of the step it was forecast at, one
 * inside narrows it a little.
 *
 *   q ← q + rate(h) · size · ((1 − α) if outside, −α if inside),   α = 1 − coverage
 *
 * "Outside" is held against the bounds that were issued with the forecast, h ticks ago, not against those of now: only then
 * do misses and hits add up to the move of q, and so their share comes to α, whatever the errors and however alike
 * neighbouring ones are. rate(h) falls with h, since the answer comes h ticks late and a run of misses at a long step tells
 * of one event. `size` is the calibrated radius q0; less where q has fallen below it, min(q0, max(q, q0 / 16)), or a plant
 * that has calmed down would be swung about by steps of its old size; more where q0 proves far too small, at least
 * min(max(|e|, q) / 16, q), so that a signal that stood still when it was calibrated is caught up with.
 * While readings are missing, another factor ("stretch") is moved in the same way by the forecasts made in gaps.
 * Steps between the scored ones take the ratio q / q0 of their neighbours, by straight lines.
 *
 * Bundles without a long rate are tracked as when they were made: rate and size the same at every step, min(q, q0) for
 * the size, held against the bounds of now, forecasts from gaps not scored.
 *
 * source  Gibbs and Candès, NeurIPS (2021), adaptive conformal inference; the radius itself moved: Angelopoulos, Candès and
 *         Tibshirani, NeurIPS (2023), conformal PID control, quantile tracking. The delay, the falling rate, `size` and
 *         stretch are our own.
 */
import { FilterError } from './errors.ts';
import { type Bounds, radiiOf } from './interval.ts';
import type { CommonModel } from './model.ts';
import { type FilterState, MISSING, STUCK } from './state.ts';

/** An error this many times the radius shows that the calibrated one is of the wrong size. */
const WRONG_SIZE = 16;
/** Smallest stretch. */
export const LEAST_STRETCH = 0.25;
/** Largest stretch. */
export const MOST_STRETCH = 8;

/**
 * Scores the forecasts of this tick that were issued earlier, moves the radii, and takes the new path in. Once a tick,
 * after `update`; after a tick left out the forecasts under way are dropped, since they no longer line up.
 *
 * shapes  medianPath (ny × H), as forecastPath wrote it
 * units   medianPath in units of the signals
 * throws  FilterError 'tick' when called twice for a tick or before the first
 * source  as the file head says
 * cost    O(ny · H); allocates nothing
 */
export function trackBounds(model: CommonModel, bounds: Bounds, state: FilterState, medianPath: Float64Array): void {
  const tick = state.tick;
  if (tick < 0 || tick === bounds.tick) {
    throw new FilterError('tick', `bounds: expected a tick after ${bounds.tick}, got ${tick}`, {
      details: { last: bounds.tick, got: tick },
    });
  }
  if (tick !== bounds.tick + 1) bounds.issued.fill(Number.NaN);
  bounds.tick = tick;
  const isWarm = bounds.warmed >= model.warmupTicks;
  if (!isWarm) bounds.warmed++;
  const { steps, slots, issuedWidth: width } = bounds;
  const ny = model.signalCount;
  for (let k = 0, ring = 0; k < steps.length; ring += steps[k] * ny, k++)
    slots[k] = (ring + (tick % steps[k]) * ny) * width;
  for (let i = 0; i < ny; i++) {
    if (state.observed[i] === MISSING || state.observed[i] === STUCK) continue;
    if (width === 1) {
      for (let k = 0; k < steps.length; k++) scoreFirst(model, bounds, state, i, k, slots[k] + i);
    } else {
      for (let k = 0; k < steps.length; k++) score(model, bounds, state, i, k, slots[k] + 2 * i);
      spreadRadii(model, bounds, i);
    }
  }
  for (let i = 0; i < ny; i++) issue(model, bounds, state, i, isWarm, medianPath);
}

/** Puts the new path of a signal, and its half-widths, where those just scored stood. */
function issue(
  model: CommonModel,
  bounds: Bounds,
  state: FilterState,
  signal: number,
  isWarm: boolean,
  medianPath: Float64Array,
): void {
  const { steps, slots, issued, issuedWidth: width } = bounds;
  const row = signal * model.horizon - 1;
  const mean = model.mean[signal];
  const scale = model.scale[signal];
  const isAged = state.age[signal] > 0;
  const isScored = isWarm && (width === 1 ? !isAged : state.started[signal] === 1);
  for (let k = 0; k < steps.length; k++) {
    issued[slots[k] + width * signal] = isScored ? (medianPath[row + steps[k]] - mean) / scale : Number.NaN;
  }
  if (width === 1) return;
  if (isAged) {
    radiiOf(model, bounds, state, signal, bounds.scratch, 0);
    for (let k = 0; k < steps.length; k++) issued[slots[k] + 2 * signal + 1] = -bounds.scratch[steps[k] - 1];
  } else {
    // What radiiOf gives for a signal read at this tick.
    const { radius } = bounds;
    for (let k = 0; k < steps.length; k++) issued[slots[k] + 2 * signal + 1] = radius[row + steps[k]];
  }
}

/** Moves one radius, or one stretch, by the error of the forecast that stands in `slot`, if one does. */
function score(model: CommonModel, bounds: Bounds, state: FilterState, signal: number, k: number, slot: number): void {
  const error = Math.abs(state.reading[signal] - bounds.issued[slot]);
  const issued = bounds.issued[slot + 1];
  if (error - error !== 0 || issued - issued !== 0) return;
  const cell = signal * model.horizon + bounds.steps[k] - 1;
  const move = bounds.rates[k] * (error > Math.abs(issued) ? model.coverage : model.coverage - 1);
  if (issued < 0) {
    bounds.stretch[cell] = Math.min(MOST_STRETCH, Math.max(LEAST_STRETCH, bounds.stretch[cell] + move));
    return;
  }
  const q = bounds.radius[cell];
  const start = bounds.calibrated[cell];
  const usual = Math.min(start, Math.max(q, start / WRONG_SIZE));
  const size = Math.max(usual, Math.min(Math.max(error, q) / WRONG_SIZE, q));
  bounds.radius[cell] = Math.min(bounds.ceiling[signal], Math.max(bounds.floor[cell], q + move * size));
}

/** The same as the first bundles were tracked. */
function scoreFirst(
  model: CommonModel,
  bounds: Bounds,
  state: FilterState,
  signal: number,
  k: number,
  slot: number,
): void {
  const error = state.reading[signal] - bounds.issued[slot];
  if (error - error !== 0) return;
  const cell = signal * model.horizon + bounds.steps[k] - 1;
  const q = bounds.radius[cell];
  const stride = bounds.rates[k] * Math.min(q, bounds.calibrated[cell]);
  const moved = q + stride * (Math.abs(error) > q ? model.coverage : model.coverage - 1);
  bounds.radius[cell] = Math.min(bounds.ceiling[signal], Math.max(bounds.floor[cell], moved));
}

/**
 * Radii and stretches of the steps between the scored ones.
 *
 * shapes  one signal's row of each
 * throws  nothing
 * cost    O(H); allocates nothing
 */
export function spreadRadii(model: CommonModel, bounds: Bounds, signal: number): void {
  const { steps, radius, calibrated, stretch } = bounds;
  const row = signal * model.horizon - 1;
  for (let k = 0; k + 1 < steps.length; k++) {
    const from = row + steps[k];
    const to = row + steps[k + 1];
    if (to === from + 1) continue;
    const first = radius[from] / calibrated[from];
    const last = radius[to] / calibrated[to];
    for (let cell = from + 1; cell < to; cell++) {
      const share = (cell - from) / (to - from);
      const q = calibrated[cell] * (first + share * (last - first));
      radius[cell] = Math.min(bounds.ceiling[signal], Math.max(bounds.floor[cell], q));
      stretch[cell] = stretch[from] + share * (stretch[to] - stretch[from]);
    }
  }
}
