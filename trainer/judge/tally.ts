/**
 * Gathers what a hindcast is made of, origin by origin.
 */

import type { Model } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import { joined } from '../linalg/joined.ts';
import { Coverage } from './coverage.ts';
import type { Hindcast, HindcastPath } from './hindcast.ts';
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
  #origins = 0;
  readonly #lossEvery: number;
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
    this.#lossEvery = Math.max(1, Math.ceil(((to - from) * ny * (rivals.length + 1)) / MOST_LOSSES));
    this.#losses = readings.map(() => []);
    this.#rivalLosses = rivals.flatMap(() => readings.map(() => []));
    this.#every = strideOfPaths(horizon, Math.floor((to - from - horizon + 1) / KEPT_PATHS));
  }

  visit(moment: Moment, series: Series): void {
    const { at, median } = moment;
    for (let i = 0; i < this.#ny; i++) {
      if (at >= this.#from) this.#residuals[i][at - this.#from] = this.#readings[i][at] - this.#next[i];
      this.#next[i] = median[i * this.#horizon];
    }
    if (at + this.#horizon >= this.#to || series.excluded?.isExcluded[at] === 1) return;
    const isKept = this.#origins++ % this.#lossEvery === 0;
    if (isKept) this.#originMs.push((series.firstTick + at) * series.tickMs);
    for (let i = 0; i < this.#ny; i++) this.#score(i, moment, isKept);
    if ((at - this.#from + 1) % this.#every === 0) {
      this.#paths.push({
        originMs: (series.firstTick + at) * series.tickMs,
        median: median.slice(),
        lower: moment.lower.slice(),
        upper: moment.upper.slice(),
      });
    }
  }

  #score(signal: number, { at, median, lower, upper }: Moment, isKept: boolean): void {
    const y = this.#readings[signal];
    const H = this.#horizon;
    for (let h = 1; h <= H; h++) {
      const reading = y[at + h];
      const cell = signal * H + h - 1;
      if (!Number.isNaN(reading)) this.#coverage.add(cell, reading, lower[cell], upper[cell]);
    }
    const own = this.#addPath(this.#own, signal, at, median, signal * H);
    if (isKept) this.#losses[signal].push(own);
    this.#rivals.forEach((rival, r) => {
      rival.forecast(signal, at, this.#path);
      const loss = this.#addPath(this.#theirs[r], signal, at, this.#path, 0);
      if (isKept) this.#rivalLosses[r * this.#ny + signal].push(loss);
    });
  }

  /** Adds a path's errors and gives their mean square; NaN where no reading came. */
  #addPath(scores: Scores, signal: number, at: number, path: Float64Array, first: number): number {
    const y = this.#readings[signal];
    const H = this.#horizon;
    let sum = 0;
    let count = 0;
    for (let h = 1; h <= H; h++) {
      const reading = y[at + h];
      if (Number.isNaN(reading)) continue;
      const error = path[first + h - 1] - reading;
      scores.add(signal * H + h - 1, error);
      sum += error * error;
      count++;
    }
    return count > 0 ? sum / count : Number.NaN;
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
      lossEvery: this.#lossEvery,
      originMs: Float64Array.from(this.#originMs),
      pathLoss: this.#losses.map((losses) => Float64Array.from(losses)),
      rivalPathLoss: this.#rivalLosses.map((losses) => Float64Array.from(losses)),
    };
  }
}
