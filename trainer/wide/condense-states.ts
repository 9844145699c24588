/** States of projected frames by a condenser, tick by tick, and how well it forecasts frames it never saw. */
import type { Condenser } from './condenser.ts';
import { PastFeatures } from './past-features.ts';
import type { ProjectedFrames } from './projected-frames.ts';
import { mapStates } from './state-map.ts';

/** Origins that are scored, at most. */
const MOST_ORIGINS = 2000;

/** Past features as a condenser makes them. */
function pastOf({ shape, record, featureMean }: Condenser): PastFeatures {
  const { features, seed, window, numbers } = shape;
  return new PastFeatures(window, numbers, {
    features,
    seed,
    width: record.featureWidth,
    mean: featureMean,
    scale: record.featureScale,
  });
}

/** States by tick. */
export interface StateSeries {
  readonly order: number;
  readonly everyMs: number;
  /** Start of each tick, milliseconds since 1970 UTC, rising; ticks without a state are left out. */
  readonly timesMs: Float64Array;
  /** (ticks × order). */
  readonly values: Float64Array;
}

/**
 * States at every tick of `everyMs`: the mean of those that fall into it.
 *
 * units  milliseconds
 */
export function stateSeries(
  condenser: Condenser,
  frames: ProjectedFrames,
  everyMs: number,
  progress: (done: number, total: number) => void,
): StateSeries {
  const { order } = condenser.record;
  const { window } = condenser.shape;
  const past = pastOf(condenser);
  const phi = new Float64Array(past.length);
  const x = new Float64Array(order);
  const sum = new Float64Array(order);
  const times: number[] = [];
  const values: number[] = [];
  let tick = Number.NaN;
  let count = 0;
  const close = (): void => {
    if (count === 0) return;
    times.push(tick * everyMs);
    for (let k = 0; k < order; k++) values.push(sum[k] / count);
    sum.fill(0);
    count = 0;
  };
  frames.visit(window, 0, frames.count, (row, first) => {
    past.write(row, 0, phi);
    mapStates(condenser, phi, x);
    // A frame a hair before its tick by rounding of times belongs to it.
    const now = Math.floor((frames.timeOf(first + window - 1) + 1e-6 * everyMs) / everyMs);
    if (now !== tick) close();
    tick = now;
    for (let k = 0; k < order; k++) sum[k] += x[k];
    count++;
    progress(first, frames.count);
  });
  close();
  return { order, everyMs, timesMs: Float64Array.from(times), values: Float64Array.from(values) };
}

/** Squared errors a number, by step 1 … horizon, in units of the frames' own variance. */
export interface CondenseScore {
  readonly origins: number;
  readonly fromMs: number;
  readonly toMs: number;
  /** Forecast from the state; the newest frame held; the mean frame of the learning part. */
  readonly ours: Float64Array;
  readonly held: Float64Array;
  readonly mean: Float64Array;
  /** (order × horizon) of the states themselves: by their own recursion, and the newest state held. */
  readonly stateOurs: Float64Array;
  readonly stateHeld: Float64Array;
}

/** The first frame that a condenser neither learned nor was decided from; frames of another time are all so. */
export function firstHeldOut({ record }: Condenser, frames: ProjectedFrames): number {
  if (frames.timeOf(0) >= record.decidedUntilMs || frames.timeOf(frames.count - 1) < record.startMs) return 0;
  let index = 0;
  while (index < frames.count && frames.timeOf(index) < record.decidedUntilMs) index++;
  return index;
}

/** Scores forecasts over frames [from, to); null where no window fits. */
export function scoreCondenser(
  condenser: Condenser,
  frames: ProjectedFrames,
  from: number,
  to: number,
): CondenseScore | null {
  const { window, horizon, numbers } = condenser.shape;
  const d = condenser.record.order;
  const past = pastOf(condenser);
  const phi = new Float64Array(past.length);
  const now = new Float64Array(d);
  const then = new Float64Array(d);
  const path = new Float64Array(d);
  const [ours, held, mean] = [new Float64Array(horizon), new Float64Array(horizon), new Float64Array(horizon)];
  const [stateOurs, stateHeld] = [new Float64Array(d * horizon), new Float64Array(d * horizon)];
  const stride = Math.max(1, Math.floor((to - from) / MOST_ORIGINS));
  let origins = 0;
  let [first, last] = [from, from];
  frames.visit(
    window + horizon,
    from,
    to,
    (row, at) => {
      if (origins === 0) first = at;
      last = at;
      origins++;
      past.write(row, 0, phi);
      mapStates(condenser, phi, now);
      path.set(now);
      for (let h = 0; h < horizon; h++) {
        addFrameErrors(condenser, row, now, h, ours, held, mean);
        step(condenser.transition, path, d);
        past.write(row, (h + 1) * numbers, phi);
        mapStates(condenser, phi, then);
        for (let k = 0; k < d; k++) {
          stateOurs[k * horizon + h] += (then[k] - path[k]) ** 2;
          stateHeld[k * horizon + h] += (then[k] - now[k]) ** 2;
        }
      }
    },
    stride,
  );
  if (origins === 0) return null;
  for (const errors of [ours, held, mean]) for (let h = 0; h < horizon; h++) errors[h] /= origins * numbers;
  for (const errors of [stateOurs, stateHeld]) for (let k = 0; k < errors.length; k++) errors[k] /= origins;
  const fromMs = frames.timeOf(first + window - 1);
  return { origins, fromMs, toMs: frames.timeOf(last + window - 1), ours, held, mean, stateOurs, stateHeld };
}

function addFrameErrors(
  { shape, record, forecastMap, own }: Condenser,
  row: Float64Array,
  x: Float64Array,
  h: number,
  ours: Float64Array,
  held: Float64Array,
  mean: Float64Array,
): void {
  const { window, numbers } = shape;
  const d = record.order;
  const newest = (window - 1) * numbers;
  const came = (window + h) * numbers;
  for (let j = 0; j < numbers; j++) {
    let told = own[h * numbers + j] * row[newest + j];
    const at = (h * numbers + j) * d;
    for (let k = 0; k < d; k++) told += forecastMap[at + k] * x[k];
    ours[h] += (row[came + j] - told) ** 2;
    held[h] += (row[came + j] - row[newest + j]) ** 2;
    mean[h] += row[came + j] ** 2;
  }
}

/** x ← A x. */
function step(a: Float64Array, x: Float64Array, d: number): void {
  const next = new Float64Array(d);
  for (let i = 0; i < d; i++) for (let j = 0; j < d; j++) next[i] += a[i * d + j] * x[j];
  x.set(next);
}
