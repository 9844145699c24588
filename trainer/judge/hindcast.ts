/**
 * Forecasts replayed over held-out history and scored beside the rivals: one origin a tick, every step of every signal,
 * only pairs whose reading is there. Readings are scored as the filter takes them, clipped to the bundle's widest values,
 * so that one impossible spike does not decide the table; the rivals are scored on the same. In time that the site file
 * excludes, the filter and the rivals see the readings, as the gateway would, but no pair counts whose origin or target
 * lies in it.
 */
import type { Model } from '@stillwell/runtime/filter';
import { withoutExcluded } from '../exclusions.ts';
import type { Series } from '../history/series.ts';
import type { TickSpan } from '../span.ts';
import { type AskedLimit, askEvery, Crossings, clipped, usualLimits } from './crossings.ts';
import { type PlanTrial, plannerOf } from './plan-trial.ts';
import { type Reliability, reliabilityOf } from './reliability.ts';
import { replay } from './replay.ts';
import { carryForward, makeRivals } from './rivals.ts';
import { Tally } from './tally.ts';

/**
 * shapes  arrays (ny × H), row-major, entry i·H + h - 1; rival arrays (rivals × ny × H)
 * units   mse in unit², mae, bias and width in unit; `standardised` ones divided by the learning part's standard deviation
 */
export interface Hindcast {
  readonly signals: readonly string[];
  readonly units: readonly string[];
  readonly horizon: number;
  readonly tickMs: number;
  /**
   * Origins scored, none in excluded time: from the tick before the held-out part to the last with a whole horizon in it, or of
   * very many every second, third and so on.
   */
  readonly origins: number;
  readonly fromMs: number;
  readonly toMs: number;
  readonly rivals: readonly string[];
  /** Pairs of forecast and reading behind each entry. */
  readonly count: Float64Array;
  readonly mse: Float64Array;
  readonly mae: Float64Array;
  readonly bias: Float64Array;
  readonly mseStandardised: Float64Array;
  readonly maeStandardised: Float64Array;
  readonly rivalMse: Float64Array;
  readonly rivalMae: Float64Array;
  /** (ny) standard deviation of the learning part, in `unit`. */
  readonly scale: Float64Array;
  readonly nominalCoverage: number;
  readonly coverage: Float64Array;
  readonly width: Float64Array;
  /** (ny) of (ticks): one-step residual in `unit`, NaN where the reading is missing. */
  readonly residuals: readonly Float64Array[];
  /** Whole paths kept for plots, one every few ticks: origin label and (ny × H) arrays in `unit`. */
  readonly paths: readonly HindcastPath[];
  /** (ny) of (ticks): the readings of the held-out part, first at fromMs. */
  readonly readings: readonly Float64Array[];
  /** Every how many-th origin's losses are kept: 1, unless there are very many origins, or signals enough to fill the memory. */
  readonly lossEvery: number;
  /** (kept) label of each origin whose losses are kept. */
  readonly originMs: Float64Array;
  /** (ny) of (kept): mean squared error of the whole path from that origin, unit²; NaN where no reading came. */
  readonly pathLoss: readonly Float64Array[];
  /** (rivals · ny) of (kept), row r·ny + i: the same of a rival. */
  readonly rivalPathLoss: readonly Float64Array[];
  /** Whether crossing probabilities came true as often as they said; null where there was no limit to ask about. */
  readonly reliability: Reliability | null;
}

/** One whole path kept for plots: origin and (ny × H) arrays in `unit`. */
export interface HindcastPath {
  readonly originMs: number;
  readonly median: Float64Array;
  readonly lower: Float64Array;
  readonly upper: Float64Array;
}

/** What to judge, in ticks since 1970. */
export interface HindcastSpan extends TickSpan {
  /** What rivals may learn from; null, or outside the series: rivals that need it are left out. */
  readonly learn: TickSpan | null;
  /** Model whose clips the readings are scored under, so that two models are held against the same; the one replayed. */
  readonly clipAs?: Model;
  /** Limits that the site declares; where there are none, quantiles of the learning part are asked about. */
  readonly limits?: readonly AskedLimit[];
  /** What the forecasts are told of the future of the planned inputs (counted from the first input); nothing. */
  readonly plan?: { readonly trial: PlanTrial; readonly inputs: readonly number[] };
}

/**
 * Replays a model over a span and scores it beside the rivals.
 *
 * shapes  series with the model's channels; span inside it, longer than the horizon; units (nc)
 * units   the signals'
 * throws  RangeError if the span leaves the series or holds no whole horizon
 * source  rolling origin: Tashman, International Journal of Forecasting 16 (2000)
 * cost    one filter step and H scores a signal and rival at every origin
 */
export function hindcast(model: Model, series: Series, span: HindcastSpan, units: readonly string[]): Hindcast {
  const from = span.fromTick - series.firstTick;
  const to = span.toTick - series.firstTick;
  const { signalCount: ny, horizon: H } = model;
  if (from < 1 || to > series.ticks || to - from < H) {
    throw new RangeError(`Span ${from}..${to} with horizon ${H} leaves the ${series.ticks} ticks of the series.`);
  }
  const { clipLow, clipHigh } = span.clipAs ?? model;
  const seen = series.values.slice(0, ny).map((y, i) => clipped(y, clipLow[i], clipHigh[i]));
  const readings = withoutExcluded({ ...series, values: seen }).values;
  const carry = (y: Float64Array, i: number): Float64Array => carryForward(y, model.mean[i]);
  const carried = seen.map(carry);
  const learn = within(span.learn, series);
  const rivals = makeRivals({
    carried,
    taught: readings === seen ? carried : readings.map(carry),
    horizon: H,
    periodTicks: model.seasonalPeriod,
    tickMs: series.tickMs,
    knownTicks: from,
    learn,
  });
  const tally = new Tally(ny, H, from, to, rivals, readings);
  const { trial, inputs } = span.plan ?? { trial: 'none', inputs: [] };
  const planner = plannerOf(trial, model, series, { fromTick: from, toTick: to }, inputs);
  const { limits = [] } = span;
  const asked = limits.length > 0 || learn === null ? limits : usualLimits(series, learn);
  const crossings = new Crossings(model, asked, readings, to);
  const every = askEvery(to - from - H + 1, asked.length);
  replay(
    model,
    series,
    { fromTick: from - 1, toTick: to },
    (moment) => {
      tally.visit(moment, series);
      const isAsked = (moment.at - from + 1) % every === 0 && series.excluded?.isExcluded[moment.at] !== 1;
      if (isAsked) crossings.visit(moment);
    },
    { planner, wantsBounds: (at) => tally.wantsBounds(at) },
  );
  const isDeclared = limits.length > 0;
  const reliability = crossings.pairs.length > 0 ? reliabilityOf(crossings.pairs, asked.length, isDeclared) : null;
  return Object.freeze({ ...tally.result(model, series, units), reliability });
}

/** The span as indices, or null where the series does not hold all of it. */
function within(span: TickSpan | null, series: Series): TickSpan | null {
  if (span === null) return null;
  const fromTick = span.fromTick - series.firstTick;
  const toTick = span.toTick - series.firstTick;
  return fromTick >= 0 && toTick <= series.ticks && toTick > fromTick ? { fromTick, toTick } : null;
}
