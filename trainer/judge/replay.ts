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
} from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import type { TickSpan } from '../span.ts';
import { Follower } from './follow.ts';
import { scoreEvery } from './origin-budget.ts';
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

/** Before a long span, bounds are tracked over this many ticks of the warm-up, by when they no longer show their start. */
const MOST_TRACKED = 6000;

/** What a replay with bounds may be asked beside its paths. */
export interface ReplayOptions {
  /** Null: nothing is planned. */
  readonly planner?: Planner | null;
  /** At which indices `lower` and `upper` are worked out; at the others they are left as they were. All by default. */
  readonly wantsBounds?: (at: number) => boolean;
}

/**
 * Replays with tracked bounds.
 *
 * shapes  span of indices into the series whose ticks are visited; the filter and its bounds are warmed up on the
 *         ticks before it until the start no longer shows, as far as the series goes back
 * units   the signals'
 * throws  FilterError if the model does not fit the series
 */
export function replay(
  model: Model,
  series: Series,
  span: TickSpan,
  visit: (moment: Moment) => void,
  { planner = null, wantsBounds = () => true }: ReplayOptions = {},
): void {
  const bounds: Bounds = createBounds(model);
  const lower = new Float64Array(model.signalCount * model.horizon);
  const upper = new Float64Array(lower.length);
  const isLong = scoreEvery(span.toTick - span.fromTick) > 1;
  const trackedFrom = isLong ? span.fromTick - MOST_TRACKED : Number.NEGATIVE_INFINITY;
  run(model, series, span, { planner, isVisited: (at) => at >= trackedFrom }, (at, state, median) => {
    trackBounds(model, bounds, state, median);
    if (at < span.fromTick) return;
    if (wantsBounds(at)) intervalOf(model, bounds, state, median, lower, upper);
    visit({ at, state, median, bounds, lower, upper });
  });
}

/** What a replay of paths may be asked. */
export interface PathOptions {
  /** Null: nothing is planned. */
  readonly planner?: Planner | null;
  /** Every so many indices are visited, the first of the span first; 1 by default. Paths of the others are not worked out. */
  readonly every?: number;
  /** From where it goes on, in place of warming up once more. */
  readonly standing?: Standing | undefined;
}

/** A filter warmed up, as it stands before the tick at an index. It is copied, never moved on, by those who start from it. */
export interface Standing {
  readonly at: number;
  readonly state: FilterState;
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
  { planner = null, every = 1, standing }: PathOptions = {},
): void {
  const isVisited = (at: number): boolean => at >= span.fromTick && (every === 1 || (at - span.fromTick) % every === 0);
  run(model, series, span, { planner, isVisited, standing }, (at, state, median) => visit({ at, state, median }));
}

/**
 * The filter as a replay of the span would have it before the tick at index `at`: where several replays that differ only from
 * there on begin. With `isGuardLeft` its guard passes nothing over on the way, which is quicker.
 *
 * shapes  at no later than the span's start
 * units   none
 * throws  as `replay`
 */
export function standingAt(model: Model, series: Series, span: TickSpan, at: number, isGuardLeft = false): Standing {
  const start = startOf(model, span);
  const follower = new Follower(model, series, createState(model));
  for (let t = start; t < at; t++) follower.take(t, false, isGuardLeft);
  follower.catchUp();
  return { at: Math.max(at, start), state: follower.state };
}

/** First index of the warm-up: from where the filter's start no longer shows at the span's. */
function startOf(model: Model, span: TickSpan): number {
  return Math.max(0, span.fromTick - Math.max(model.warmupTicks, settlingTicksOf(model)));
}

/** A copy of a standing filter; where the model counts repeated readings and that one did not, it begins to. */
function goingOn(model: Model, standing: Standing): FilterState {
  const state = structuredClone(standing.state);
  if (model.stuck === undefined || state.repeats.length > 0) return state;
  return { ...state, repeats: new Int32Array(model.signalCount), repeated: new Float64Array(model.signalCount) };
}

/** Every tick from the start of the warm-up; paths where they are visited. Before a long span the guard is left out. */
function run(
  model: Model,
  series: Series,
  span: TickSpan,
  {
    planner,
    isVisited,
    standing,
  }: Pick<PathOptions, 'standing'> & {
    readonly planner: Planner | null;
    readonly isVisited: (at: number) => boolean;
  },
  each: (at: number, state: FilterState, median: Float64Array) => void,
): void {
  const follower = new Follower(model, series, standing === undefined ? createState(model) : goingOn(model, standing));
  const { state } = follower;
  const median = new Float64Array(model.signalCount * model.horizon);
  const plan = new Float64Array((model.channelCount - model.signalCount) * model.horizon);
  const isLong = scoreEvery(span.toTick - span.fromTick) > 1;
  for (let at = standing?.at ?? startOf(model, span); at < span.toTick; at++) {
    const isSeen = isVisited(at);
    follower.take(at, isSeen, isLong && at < span.fromTick);
    if (!isSeen) continue;
    if (planner !== null) planner(at, plan);
    forecastPath(model, state, median, planner === null ? null : plan);
    each(at, state, median);
  }
}
