/**
 * Bounds around the forecast path that keep adapting: one half-width ("radius") per signal and step, moved by what tracking.ts
 * makes of the forecasts that have come true, so that in the long run the stated share of readings lies inside, whatever
 * the distribution, without a record of residuals.
 *
 * Each radius is kept between half a step of the sensor's lattice (at least a 64th of the calibrated one) and the width of
 * the clip range. During a gap the bounds widen with the age of the last reading: step h has the largest radius up to step
 * age + h, and beyond the horizon H goes linearly, over another H, to the signal's seasonal spread (one standard deviation,
 * times the normal quantile of the coverage); all of it times a tracked factor, its `stretch`.
 * Not a guarantee for any single step: coverage holds over time.
 */
import type { CommonModel } from './model.ts';
import { normalQuantile } from './normal-table.ts';
import type { FilterState } from './state.ts';

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
  /** (ny × H) what half-widths are multiplied by while readings are missing; 1 until a gap has shown otherwise. */
  readonly stretch: Float64Array;
  /** Ascending steps whose forecasts are scored, 1 and H among them; radii of the steps between follow their neighbours. */
  readonly steps: Int32Array;
  /** Largest move of the radius of each scored step, as a share of the calibrated one. */
  readonly rates: Float64Array;
  /** Where the first signal's forecast of each scored step stands at this tick; for work inside one call. */
  readonly slots: Int32Array;
  /** Numbers of a forecast under way: its median; from the second tracker on its half-width too, negative if made in a gap. */
  readonly issuedWidth: 1 | 2;
  /**
   * Forecasts still to be scored, float32, NaN where none. Scored steps one after another, each with a ring of its own of h
   * slots of ny · issuedWidth numbers: the slot tick mod h holds the forecast issued h ticks ago, until the new one takes
   * its place.
   */
  readonly issued: Float32Array;
  /** Normal quantile of the coverage: a half-width is that many standard deviations of a normal error. */
  readonly quantile: number;
  /** (H) each for work inside one call. */
  readonly scratch: Float64Array;
  readonly crossed: Float64Array;
}

/** Steps are scored one by one up to here … */
const DENSE_STEPS = 16;
/** … and from here on four in each doubling; between, eight. Measured: no coverage is lost by it. */
const WIDE_STEPS = 32;
/** The tracker's step at h is at most longRate / (h + this). */
const RATE_AHEAD = 5;

/**
 * Bounds as calibrated, nothing tracked yet.
 *
 * shapes  issued takes 8 ny bytes times the sum of the scored steps: 35 KB at 8 signals and 60 steps, 46 KB at 96, 133 KB at
 *         288; for bundles without a long rate 2 ny H(H + 1) bytes
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
  const { boundsRate, boundsLongRate } = model;
  const isFirst = boundsLongRate === undefined;
  const steps = Int32Array.from(isFirst ? Array.from({ length: H }, (_, k) => k + 1) : scoredSteps(H));
  const issuedWidth = isFirst ? 1 : 2;
  return {
    tick: -1,
    warmed: 0,
    radius: Float64Array.from(calibrated),
    calibrated,
    floor,
    ceiling,
    spread: new Float64Array(ny).fill(quantile),
    stretch: new Float64Array(ny * H).fill(1),
    steps,
    rates: Float64Array.from(steps, (h) =>
      isFirst ? boundsRate : Math.min(boundsRate, boundsLongRate / (h + RATE_AHEAD)),
    ),
    slots: new Int32Array(steps.length),
    issuedWidth,
    issued: new Float32Array(ny * issuedWidth * steps.reduce((sum, h) => sum + h, 0)).fill(Number.NaN),
    quantile,
    scratch: new Float64Array(H),
    crossed: new Float64Array(H),
  };
}

/** 1 … 16, then 18 … 32, then four in each doubling: 40 … 64, 80 … 128 and so on, and H: neighbouring steps err alike. */
function scoredSteps(horizon: number): number[] {
  const steps: number[] = [];
  let gap = 1;
  for (let h = 1; h < horizon; h += gap) {
    steps.push(h);
    const isDoubling = (h & (h - 1)) === 0;
    if (isDoubling && h >= DENSE_STEPS) gap = h < WIDE_STEPS ? h / 8 : h / 4;
  }
  return [...steps, horizon];
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
    const width = widest + beyond * (Math.max(widest, bounds.spread[signal]) - widest);
    out[at + h - 1] = Math.min(bounds.ceiling[signal], width * bounds.stretch[row + h - 1]);
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
