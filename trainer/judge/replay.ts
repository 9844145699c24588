/**
 * Runs the gateway's own filter over a history, tick by tick: what is judged is exactly what the gateway computes, its
 * rounding, clips, guards and tracked bounds included.
 */
import {
  type Bounds,
  createBounds,
  createState,
  type FilterState,
  forecastPath,
  intervalOf,
  type Model,
  settlingTicksOf,
  trackBounds,
  update,
} from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import type { TickSpan } from '../span.ts';
import type { Planner } from './plan-trial.ts';

/** What the filter has to say after a tick; the arrays are overwritten at the next. */
export interface PathMoment {
  /** Index into the series. */
  readonly at: number;
  readonly state: FilterState;
  /** (ny × H) in the signals' units */
  readonly median: Float64Array;
}

/** The same with bounds, (ny × H) in the signals' units. */
export interface Moment extends PathMoment {
  /** As tracked up to this tick. */
  readonly bounds: Bounds;
  readonly lower: Float64Array;
  readonly upper: Float64Array;
}

/**
 * Replays with tracked bounds.
 *
 * shapes  span of indices into the series whose ticks are visited; the filter and its bounds are warmed up on the
 *         ticks before it until the start no longer shows, as far as the series goes back; planner null: nothing planned
 * units   the signals'
 * throws  FilterError if the model does not fit the series
 */
export function replay(
  model: Model,
  series: Series,
  span: TickSpan,
  visit: (moment: Moment) => void,
  planner: Planner | null = null,
): void {
  const bounds: Bounds = createBounds(model);
  const lower = new Float64Array(model.signalCount * model.horizon);
  const upper = new Float64Array(lower.length);
  run(model, series, span, Number.NEGATIVE_INFINITY, planner, (at, state, median) => {
    trackBounds(model, bounds, state, median);
    if (at < span.fromTick) return;
    intervalOf(model, bounds, state, median, lower, upper);
    visit({ at, state, median, bounds, lower, upper });
  });
}

/**
 * Replays for the paths alone: half the work.
 *
 * shapes  as `replay`
 * units   the signals'
 * throws  as `replay`
 */
export function replayPaths(
  model: Model,
  series: Series,
  span: TickSpan,
  visit: (moment: PathMoment) => void,
  planner: Planner | null = null,
): void {
  run(model, series, span, span.fromTick, planner, (at, state, median) => {
    if (at >= span.fromTick) visit({ at, state, median });
  });
}

/** Every tick from the start of the warm-up; paths from tick `pathsFrom` on. */
function run(
  model: Model,
  series: Series,
  span: TickSpan,
  pathsFrom: number,
  planner: Planner | null,
  each: (at: number, state: FilterState, median: Float64Array) => void,
): void {
  const state = createState(model);
  const median = new Float64Array(model.signalCount * model.horizon);
  const readings = new Float64Array(model.channelCount);
  const plan = new Float64Array((model.channelCount - model.signalCount) * model.horizon);
  const warm = Math.max(model.warmupTicks, settlingTicksOf(model));
  for (let at = Math.max(0, span.fromTick - warm); at < span.toTick; at++) {
    for (let c = 0; c < readings.length; c++) readings[c] = series.values[c][at];
    update(model, state, series.firstTick + at, readings);
    if (at >= pathsFrom) {
      if (planner !== null) planner(at, plan);
      forecastPath(model, state, median, planner === null ? null : plan);
    }
    each(at, state, median);
  }
}
