/**
 * Bounds around the forecast path that keep adapting: one half-width ("radius") per signal and step, moved by a quantile
 * tracker. A reading outside widens the radius of the step it was forecast at, one inside narrows it a little, so that in
 * the long run the stated share lies inside, whatever the distribution, without a buffer of residuals.
 *
 *   q ← q + rate · min(q, q0) · ((1 − α) if outside, −α if inside),   α = 1 − coverage, q0 the radius from calibration
 *
 * min(q, q0): steps shrink with q below its calibrated size, so that q stays positive, and stay level above it, so that a
 * run of misses at a long step, which all tell of one event, does not multiply. Each radius is kept between half a step
 * of the sensor's lattice (at least a 64th of q0) and the width of the clip range.
 * Only forecasts issued from a fresh reading are scored, and none of the warm-up. During a gap the bounds widen with the age of
 * the last reading: step h has the largest radius up to step age + h, and beyond the horizon H goes linearly, over
 * another H, to the signal's seasonal spread (one standard deviation, times the normal quantile of the coverage).
 * Not a guarantee for any single step: coverage holds over time.
 */
import { FilterError } from './errors.ts';
import type { CommonModel } from './model.ts';
import { normalQuantile } from './normal-table.ts';
import { type FilterState, MISSING } from './state.ts';

/**
 * The tracker's buffers, apart from the filter's state since they move no prediction.
 *
 * shapes  ny signals, H horizon
 * units   standardised
 */
export interface Bounds {
  /** Tick tracked last; −1 before the first. */
  tick: number;
  /** Ticks tracked, counted up to the warm-up's length. */
  warmed: number;
  /** (ny × H) half-widths now. */
  readonly radius: Float64Array;
  /** (ny × H) half-widths from calibration, within floor and ceiling. */
  readonly calibrated: Float64Array;
  readonly floor: Float64Array;
  /** (ny) */
  readonly ceiling: Float64Array;
  /** (ny) half-width when nothing but the season is known. */
  readonly spread: Float64Array;
  /**
   * Forecasts still to be scored, float32, NaN where none. Step h has a ring of its own of h slots of ny values, from
   * ny · h(h − 1)/2: the slot tick mod h holds the forecast issued h ticks ago, until the new one takes its place.
   */
  readonly issued: Float32Array;
  /** Normal quantile of the coverage: a half-width is that many standard deviations of a normal error. */
  readonly quantile: number;
  /** (H) for work inside one call. */
  readonly scratch: Float64Array;
}

/**
 * Bounds as calibrated, nothing tracked yet.
 *
 * shapes  issued takes ny · H(H + 1)/2 float32 numbers: 59 KB at 8 signals and 60 steps, 149 KB at 96
 */
export function createBounds(model: CommonModel): Bounds {
  const { signalCount: ny, horizon: H } = model;
  const ceiling = new Float64Array(ny);
  const floor = new Float64Array(ny * H);
  const calibrated = new Float64Array(ny * H);
  for (let i = 0; i < ny; i++) {
    ceiling[i] = (model.clipHigh[i] - model.clipLow[i]) / model.scale[i];
    const halfStep = (0.5 * model.latticeStep[i]) / model.scale[i];
    for (let c = i * H; c < (i + 1) * H; c++) {
      floor[c] = Math.min(ceiling[i], Math.max(halfStep, model.radius[c] / 64));
      calibrated[c] = Math.min(ceiling[i], Math.max(floor[c], model.radius[c]));
    }
  }
  const quantile = normalQuantile(0.5 + model.coverage / 2);
  return {
    tick: -1,
    warmed: 0,
    radius: Float64Array.from(calibrated),
    calibrated,
    floor,
    ceiling,
    spread: new Float64Array(ny).fill(quantile),
    issued: new Float32Array((ny * H * (H + 1)) / 2).fill(Number.NaN),
    quantile,
    scratch: new Float64Array(H),
  };
}

/**
 * Scores the forecasts of this tick that were issued earlier, moves the radii, and takes the new path in. Once a tick,
 * after `update`; after a tick left out the forecasts under way are dropped, since they no longer line up.
 *
 * shapes  medianPath (ny × H), as forecastPath wrote it
 * units   medianPath in units of the signals
 * throws  FilterError 'tick' when called twice for a tick or before the first
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
  const { signalCount: ny, horizon: H } = model;
  const { issued } = bounds;
  for (let h = 1; h <= H; h++) {
    let slot = ((h * (h - 1)) / 2 + (tick % h)) * ny;
    for (let i = 0; i < ny; i++, slot++) {
      if (state.observed[i] !== MISSING) score(model, bounds, state, i, h, slot);
      const isScored = isWarm && state.age[i] === 0;
      issued[slot] = isScored ? (medianPath[i * H + h - 1] - model.mean[i]) / model.scale[i] : Number.NaN;
    }
  }
}

/** Moves one radius by the error of the forecast that stands in `slot`, if one does. */
function score(
  model: CommonModel,
  bounds: Bounds,
  state: FilterState,
  signal: number,
  step: number,
  slot: number,
): void {
  const error = state.reading[signal] - bounds.issued[slot];
  if (error - error !== 0) return;
  const cell = signal * model.horizon + step - 1;
  const q = bounds.radius[cell];
  const stride = model.boundsRate * Math.min(q, bounds.calibrated[cell]);
  const moved = q + stride * (Math.abs(error) > q ? model.coverage : model.coverage - 1);
  bounds.radius[cell] = Math.min(bounds.ceiling[signal], Math.max(bounds.floor[cell], moved));
}

/**
 * Half-widths of one signal for every step, wider the older its last reading is.
 *
 * shapes  out, H numbers from `at`
 * units   standardised
 * cost    O(H); allocates nothing
 */
export function radiiOf(
  model: CommonModel,
  bounds: Bounds,
  state: FilterState,
  signal: number,
  out: Float64Array,
  at: number,
): void {
  const H = model.horizon;
  const row = signal * H;
  const age = state.age[signal];
  const { radius } = bounds;
  if (age === 0) {
    for (let h = 0; h < H; h++) out[at + h] = radius[row + h];
    return;
  }
  let widest = 0;
  for (let k = 0; k < Math.min(age, H); k++) widest = Math.max(widest, radius[row + k]);
  for (let h = 1; h <= H; h++) {
    const reach = age + h;
    if (reach <= H) widest = Math.max(widest, radius[row + reach - 1]);
    const beyond = Math.min(1, Math.max(0, (reach - H) / H));
    out[at + h - 1] = widest + beyond * (Math.max(widest, bounds.spread[signal]) - widest);
  }
}

/**
 * Lower and upper bounds of every signal around its path, inside the clips.
 *
 * shapes  median, lower, upper (ny × H)
 * units   of the signals
 * cost    O(ny · H); allocates nothing
 */
export function intervalOf(
  model: CommonModel,
  bounds: Bounds,
  state: FilterState,
  median: Float64Array,
  lower: Float64Array,
  upper: Float64Array,
): void {
  const H = model.horizon;
  for (let i = 0; i < model.signalCount; i++) {
    radiiOf(model, bounds, state, i, upper, i * H);
    for (let c = i * H; c < (i + 1) * H; c++) {
      const halfWidth = model.scale[i] * upper[c];
      lower[c] = Math.max(model.clipLow[i], median[c] - halfWidth);
      upper[c] = Math.min(model.clipHigh[i], median[c] + halfWidth);
    }
  }
}
