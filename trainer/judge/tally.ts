/**
 * Gathers what a hindcast is made of, origin by origin.
 */

import type { Model } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import { joined } from '../linalg/joined.ts';
import { Coverage } from './coverage.ts';
import type { Hindcast, HindcastPath } from './hindcast.ts';
import { scoreEvery } from './origin-budget.ts';
import type { Moment } from './replay.ts';
import type { Rival } from './rivals.ts';
import { Scores } from './scores.ts';

/** Paths kept for plots: about this many, evenly spread. */
const KEPT_PATHS = 120;
/** Losses kept in all, about: a tenth of a gigabyte. */
const MOST_LOSSES = 1.5e7;

/** Largest divisor of the horizon up to `wanted`, so that kept paths can be laid end to end without a hole. */
function strideOfPaths(horizon: number, wanted: number): number {
  let stride = Math.max(1, Math.min(horizon, wanted));
  while (horizon % stride !== 0) stride--;
  return stride;
}

/** Sums of one hindcast; `from` and `to` are indices into the series. */
export class Tally {
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
  readonly #scoreEvery: number;
  #origins = 0;
  /** Of the origins scored, every so many are kept. */
  readonly #keepEvery: number;
  readonly #originMs: number[] = [];
  /** (ny) and (rivals · ny) of (origins kept so far). */
  readonly #losses: readonly number[][];
  readonly #rivalLosses: readonly number[][];

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
    this.#scoreEvery = scoreEvery(to - from - horizon + 1);
    const losses = ((to - from) / this.#scoreEvery) * ny * (rivals.length + 1);
    this.#keepEvery = Math.max(1, Math.ceil(losses / MOST_LOSSES));
    this.#losses = readings.map(() => []);
    this.#rivalLosses = rivals.flatMap(() => readings.map(() => []));
    this.#every = strideOfPaths(horizon, Math.floor((to - from - horizon + 1) / KEPT_PATHS));
  }

  /** Whether bounds are wanted at an index. */
  wantsBounds(at: number): boolean {
    return this.#isScored(at) || this.#isPlotted(at);
  }

  visit(moment: Moment, series: Series): void {
    const { at, median } = moment;
    for (let i = 0; i < this.#ny; i++) {
      if (at >= this.#from) this.#residuals[i][at - this.#from] = this.#readings[i][at] - this.#next[i];
      this.#next[i] = median[i * this.#horizon];
    }
    if (at + this.#horizon >= this.#to || series.excluded?.isExcluded[at] === 1) return;
    const originMs = (series.firstTick + at) * series.tickMs;
    if (this.#isScored(at)) this.#scoreAll(moment, originMs);
    if (!this.#isPlotted(at)) return;
    const { lower, upper } = moment;
    this.#paths.push({ originMs, median: median.slice(), lower: lower.slice(), upper: upper.slice() });
  }

  #isScored(at: number): boolean {
    return (at - this.#from + 1) % this.#scoreEvery === 0;
  }

  #isPlotted(at: number): boolean {
    return (at - this.#from + 1) % this.#every === 0;
  }

  #scoreAll({ at, median, lower, upper }: Moment, originMs: number): void {
    const isKept = this.#origins++ % this.#keepEvery === 0;
    if (isKept) this.#originMs.push(originMs);
    const H = this.#horizon;
    for (let i = 0; i < this.#ny; i++) {
      const y = this.#readings[i];
      this.#coverage.addPath(i * H, y, at + 1, lower, upper, H);
      const own = this.#own.addPath(i * H, median, i * H, y, at + 1, H);
      if (isKept) this.#losses[i].push(own);
      for (let r = 0; r < this.#rivals.length; r++) {
        this.#rivals[r].forecast(i, at, this.#path);
        const loss = this.#theirs[r].addPath(i * H, this.#path, 0, y, at + 1, H);
        if (isKept) this.#rivalLosses[r * this.#ny + i].push(loss);
      }
    }
  }

  result(model: Model, series: Series, units: readonly string[]): Omit<Hindcast, 'reliability'> {
    const H = this.#horizon;
    const own = this.#own;
    const perCell = (values: Float64Array, power: number): Float64Array =>
      values.map((value, cell) => value / model.scale[Math.floor(cell / H)] ** power);
    return {
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
      lossEvery: this.#scoreEvery * this.#keepEvery,
      originMs: Float64Array.from(this.#originMs),
      pathLoss: this.#losses.map((losses) => Float64Array.from(losses)),
      rivalPathLoss: this.#rivalLosses.map((losses) => Float64Array.from(losses)),
    };
  }
}
