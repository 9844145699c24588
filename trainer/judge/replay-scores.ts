/**
 * Squared errors of replayed paths, each reading clipped as the filter takes it: for choosing and auditing, where no rivals,
 * bounds or plots are wanted. No pair counts whose origin or target lies in excluded time.
 */
import type { Model } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import type { TickSpan } from '../span.ts';
import type { Planner } from './plan-trial.ts';
import { type PathMoment, replayPaths, type Standing } from './replay.ts';
import { meanOf, Scores } from './scores.ts';

/** What may be otherwise. */
export interface ReplayChoice {
  /** What the filter sees, where that is not the series it is scored against. */
  readonly seen?: Series;
  /** What it is told of the inputs' future. */
  readonly planner?: Planner | null;
  /** Every so many origins are scored; all by default. */
  readonly every?: number;
  /** Where the filter goes on from, in place of warming up. */
  readonly standing?: Standing | undefined;
}

/**
 * Standardised mean squared error of a model over a span, all signals and steps.
 *
 * shapes  span of indices into the series
 * units   standardised²
 * throws  FilterError if the model does not fit the series
 * source  none
 * cost    one replay
 */
export function replayError(model: Model, series: Series, span: TickSpan, choice: ReplayChoice = {}): number {
  return meanOf(replayMse(model, series, span, choice));
}

/**
 * The same by signal.
 *
 * shapes  span of indices into the series; result (ny), NaN where nothing was read
 * units   standardised²
 * throws  FilterError if the model does not fit the series
 * source  none
 * cost    one replay
 */
export function signalErrors(model: Model, series: Series, span: TickSpan, choice: ReplayChoice = {}): Float64Array {
  return bySignal(model, replayMse(model, series, span, choice));
}

/**
 * Means over the steps.
 *
 * shapes  mse (ny × H); result (ny)
 * units   as mse
 * throws  nothing
 * source  none
 * cost    trivial
 */
export function bySignal({ signalCount: ny, horizon: H }: Model, mse: Float64Array): Float64Array {
  return Float64Array.from({ length: ny }, (_, i) => meanOf(mse, i * H, (i + 1) * H));
}

/**
 * The same by signal and step.
 *
 * shapes  as `signalErrors`; result (ny × H)
 * units   standardised²
 * throws  FilterError if the model does not fit the series
 * source  none
 * cost    one replay
 */
export function replayMse(
  model: Model,
  series: Series,
  span: TickSpan,
  { seen = series, planner = null, every = 1, standing }: ReplayChoice = {},
): Float64Array {
  const { signalCount: ny, horizon: H, scale } = model;
  const visited = { fromTick: span.fromTick - 1, toTick: span.toTick - H };
  const isExcluded = series.excluded?.isExcluded;
  const scores = new Scores(ny * H);
  const truth = truthOf(model, series, visited.fromTick, span.toTick);
  const errors = new Float64Array(H);
  const score = ({ at, median }: PathMoment): void => {
    if (isExcluded?.[at] === 1) return;
    for (let i = 0; i < ny; i++) {
      const from = at + 1 - visited.fromTick;
      for (let h = 0; h < H; h++) errors[h] = (median[i * H + h] - truth[i][from + h]) / scale[i];
      scores.addErrors(i * H, errors);
    }
  };
  replayPaths(model, seen, visited, score, { planner, every, standing });
  return scores.mse();
}

/** (ny) readings of the part clipped as the filter takes them, NaN where missing or excluded; from an index before 0 on too. */
function truthOf({ clipLow, clipHigh, signalCount }: Model, series: Series, from: number, to: number): Float64Array[] {
  const isExcluded = series.excluded?.isExcluded;
  return Array.from({ length: signalCount }, (_, i) => {
    const out = new Float64Array(to - from).fill(Number.NaN);
    for (let t = Math.max(0, from); t < to; t++) {
      if (isExcluded?.[t] !== 1) out[t - from] = Math.min(clipHigh[i], Math.max(clipLow[i], series.values[i][t]));
    }
    return out;
  });
}
