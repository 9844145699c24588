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
import { Coverage } from './coverage.ts';
import { type PlanTrial, plannerOf } from './plan-trial.ts';
import { type Moment, replay } from './replay.ts';
import { carryForward, makeRivals, type Rival } from './rivals.ts';
import { Scores } from './scores.ts';

/**
 * shapes  arrays (ny × H), row-major, entry i·H + h - 1; rival arrays (rivals × ny × H)
 * units   mse in unit², mae, bias and width in unit; `standardised` ones divided by the learning part's standard deviation
 */
export interface Hindcast {
  readonly signals: readonly string[];
  readonly units: readonly string[];
  readonly horizon: number;
  readonly tickMs: number;
  /** Origins scored, none in excluded time: from the tick before the held-out part to the last with a whole horizon in it. */
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
  /** What the forecasts are told of the future of the planned inputs (counted from the first input); nothing. */
  readonly plan?: { readonly trial: PlanTrial; readonly inputs: readonly number[] };
}

/** Paths kept for plots: about this many, evenly spread. */
const KEPT_PATHS = 120;

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
  const rivals = makeRivals({
    carried: seen.map(carry),
    taught: readings.map(carry),
    horizon: H,
    periodTicks: model.seasonalPeriod,
    learn: within(span.learn, series),
  });
  const tally = new Tally(ny, H, from, to, rivals, readings);
  const { trial, inputs } = span.plan ?? { trial: 'none', inputs: [] };
  const planner = plannerOf(trial, model, series, { fromTick: from, toTick: to }, inputs);
  replay(model, series, { fromTick: from - 1, toTick: to }, (moment) => tally.visit(moment, series), planner);
  return tally.result(model, series, units);
}

/** Largest divisor of the horizon up to `wanted`, so that kept paths can be laid end to end without a hole. */
function strideOfPaths(horizon: number, wanted: number): number {
  let stride = Math.max(1, Math.min(horizon, wanted));
  while (horizon % stride !== 0) stride--;
  return stride;
}

class Tally {
  readonly #ny: number;
  readonly #horizon: number;
  readonly #from: number;
  readonly #to: number;
  readonly #rivals: readonly Rival[];
  readonly #readings: readonly Float64Array[];
  readonly #own: Scores;
  readonly #theirs: readonly Scores[];
  readonly #coverage: Coverage;
  readonly #residuals: readonly Float64Array[];
  /** (ny) one-step forecast made at the tick before, in the signals' units. */
  readonly #next: Float64Array;
  readonly #path: Float64Array;
  readonly #every: number;
  readonly #paths: HindcastPath[] = [];
  #origins = 0;

  constructor(
    ny: number,
    horizon: number,
    from: number,
    to: number,
    rivals: readonly Rival[],
    readings: readonly Float64Array[],
  ) {
    this.#ny = ny;
    this.#horizon = horizon;
    this.#from = from;
    this.#to = to;
    this.#rivals = rivals;
    this.#readings = readings;
    this.#own = new Scores(ny * horizon);
    this.#theirs = rivals.map(() => new Scores(ny * horizon));
    this.#coverage = new Coverage(ny * horizon);
    this.#residuals = readings.map(() => new Float64Array(to - from).fill(Number.NaN));
    this.#next = new Float64Array(ny).fill(Number.NaN);
    this.#path = new Float64Array(horizon);
    this.#every = strideOfPaths(horizon, Math.floor((to - from - horizon + 1) / KEPT_PATHS));
  }

  visit(moment: Moment, series: Series): void {
    const { at, median } = moment;
    for (let i = 0; i < this.#ny; i++) {
      if (at >= this.#from) this.#residuals[i][at - this.#from] = this.#readings[i][at] - this.#next[i];
      this.#next[i] = median[i * this.#horizon];
    }
    if (at + this.#horizon >= this.#to || series.excluded?.isExcluded[at] === 1) return;
    this.#origins++;
    for (let i = 0; i < this.#ny; i++) this.#score(i, moment);
    if ((at - this.#from + 1) % this.#every === 0) {
      this.#paths.push({
        originMs: (series.firstTick + at) * series.tickMs,
        median: median.slice(),
        lower: moment.lower.slice(),
        upper: moment.upper.slice(),
      });
    }
  }

  #score(signal: number, { at, median, lower, upper }: Moment): void {
    const y = this.#readings[signal];
    const H = this.#horizon;
    for (let h = 1; h <= H; h++) {
      const reading = y[at + h];
      if (Number.isNaN(reading)) continue;
      const cell = signal * H + h - 1;
      this.#own.add(cell, median[cell] - reading);
      this.#coverage.add(cell, reading, lower[cell], upper[cell]);
    }
    this.#rivals.forEach((rival, r) => {
      rival.forecast(signal, at, this.#path);
      for (let h = 1; h <= H; h++) {
        const reading = y[at + h];
        if (!Number.isNaN(reading)) this.#theirs[r].add(signal * H + h - 1, this.#path[h - 1] - reading);
      }
    });
  }

  result(model: Model, series: Series, units: readonly string[]): Hindcast {
    const H = this.#horizon;
    const own = this.#own;
    const perCell = (values: Float64Array, power: number): Float64Array =>
      values.map((value, cell) => value / model.scale[Math.floor(cell / H)] ** power);
    return Object.freeze({
      signals: series.names.slice(0, this.#ny),
      units: units.slice(0, this.#ny),
      horizon: H,
      tickMs: series.tickMs,
      origins: this.#origins,
      fromMs: (series.firstTick + this.#from) * series.tickMs,
      toMs: (series.firstTick + this.#to) * series.tickMs,
      rivals: this.#rivals.map((rival) => rival.name),
      count: own.count,
      mse: own.mse(),
      mae: own.mae(),
      bias: own.bias(),
      mseStandardised: perCell(own.mse(), 2),
      maeStandardised: perCell(own.mae(), 1),
      rivalMse: joined(this.#theirs.map((scores) => scores.mse())),
      rivalMae: joined(this.#theirs.map((scores) => scores.mae())),
      scale: model.scale.slice(0, this.#ny),
      nominalCoverage: model.coverage,
      coverage: this.#coverage.share(),
      width: this.#coverage.width(),
      residuals: this.#residuals,
      paths: this.#paths,
      readings: this.#readings.map((y) => y.slice(this.#from, this.#to)),
    });
  }
}

/** NaN stays NaN. */
function clipped(y: Float64Array, low: number, high: number): Float64Array {
  return y.map((value) => Math.min(high, Math.max(low, value)));
}

/** The span as indices, or null where the series does not hold all of it. */
function within(span: TickSpan | null, series: Series): TickSpan | null {
  if (span === null) return null;
  const fromTick = span.fromTick - series.firstTick;
  const toTick = span.toTick - series.firstTick;
  return fromTick >= 0 && toTick <= series.ticks && toTick > fromTick ? { fromTick, toTick } : null;
}

function joined(parts: readonly Float64Array[]): Float64Array {
  const out = new Float64Array(parts.reduce((sum, part) => sum + part.length, 0));
  let at = 0;
  for (const part of parts) {
    out.set(part, at);
    at += part.length;
  }
  return out;
}
