/**
 * Scores forecasts as they came over MQTT against the readings that followed, beside the obvious forecasts made from the
 * same readings at the same origins. A pair counts only where all of them have a value, so that all are judged on the same.
 */

/** The obvious forecasts scored here: no change; the same time one period ago; the line through now and one horizon ago. */
export const RIVALS = ['persistence', 'seasonal persistence', 'recent trend'] as const;

/** Sums of one stretch of play; arrays over (signals × horizon). */
export interface Tally {
  readonly label: string;
  readonly count: Float64Array;
  readonly squared: Float64Array;
  readonly inside: Float64Array;
  /** One array a rival. */
  readonly rivalSquared: readonly Float64Array[];
}

/** What a stretch came to, over all signals and horizons. */
export interface Score {
  readonly label: string;
  readonly pairs: number;
  /** Mean over signals of squared error in units of the signal's variance while learning. */
  readonly mse: number;
  readonly rivalMse: readonly number[];
  readonly bestRival: string;
  /** 1 - mse / best rival's. */
  readonly skill: number;
  readonly coverage: number;
  /** Skill against the best rival of each signal. */
  readonly signalSkill: readonly number[];
}

interface Pending {
  readonly origin: number;
  readonly label: string;
  /** (signals × 3 × horizon): median, lower, upper. */
  readonly path: ArrayLike<number>;
}

/** Scorer of one site. Ticks are absolute. */
export class Scorer {
  readonly signals: number;
  readonly horizon: number;
  readonly rivals: readonly string[];
  private readonly period: number | null;
  private readonly firstTick: number;
  private readonly readings: Float64Array[] = [];
  private readonly pending: Pending[] = [];
  private readonly tallies = new Map<string, Tally>();
  private readonly seen = new Set<number>();

  /**
   * `firstTick`: of the first reading that will be added, a period before the first origin to be scored, or earlier.
   * `period` in ticks; null: no period is known, and the seasonal rival stays away.
   */
  constructor(options: { signals: number; horizon: number; period: number | null; firstTick: number }) {
    this.signals = options.signals;
    this.horizon = options.horizon;
    this.period = options.period;
    this.rivals = RIVALS.filter((name) => options.period !== null || name !== 'seasonal persistence');
    this.firstTick = options.firstTick;
  }

  /** The next tick's readings (signals first), NaN where there was none. */
  addReadings(values: Float64Array): void {
    this.readings.push(values.slice(0, this.signals));
    const last = this.firstTick + this.readings.length - 1;
    while (this.pending.length > 0 && this.pending[0].origin + this.horizon <= last)
      this.settle(this.pending.shift() as Pending);
  }

  /** A forecast as received; a second one for the same origin and label is passed over. */
  addForecast(origin: number, label: string, path: ArrayLike<number>): void {
    if (this.seen.has(origin)) return;
    this.seen.add(origin);
    const forecast = { origin, label, path };
    if (origin + this.horizon < this.firstTick + this.readings.length) this.settle(forecast);
    else this.pending.push(forecast);
  }

  /** The score of a stretch, null when nothing was scored. `deviations`: standard deviation of each signal while learning. */
  score(label: string, deviations: readonly number[]): Score | null {
    const tally = this.tallies.get(label);
    if (tally === undefined) return null;
    const bySignal = deviations.map((deviation, i) => signalMeans(tally, i, this.horizon, deviation));
    const mean = (pick: (one: SignalMeans) => number): number =>
      bySignal.reduce((sum, one) => sum + pick(one), 0) / bySignal.length;
    const mse = mean((one) => one.mse);
    const rivalMse = this.rivals.map((_, r) => mean((one) => one.rivalMse[r]));
    const best = Math.min(...rivalMse);
    return {
      label,
      pairs: tally.count.reduce((sum, value) => sum + value, 0),
      mse,
      rivalMse,
      bestRival: this.rivals[rivalMse.indexOf(best)],
      skill: 1 - mse / best,
      coverage: mean((one) => one.coverage),
      signalSkill: bySignal.map((one) => 1 - one.mse / Math.min(...one.rivalMse)),
    };
  }

  private settle(forecast: Pending): void {
    const { signals, horizon } = this;
    const tally = this.tallyOf(forecast.label);
    for (let i = 0; i < signals; i++) {
      const now = this.held(forecast.origin, i);
      const slope = (now - this.held(forecast.origin - horizon, i)) / horizon;
      for (let h = 1; h <= horizon; h++) {
        const came = this.reading(forecast.origin + h, i);
        const at = i * 3 * horizon + h - 1;
        const error = forecast.path[at] - came;
        const line = now + slope * h - came;
        const rivals =
          this.period === null
            ? [now - came, line]
            : [now - came, this.reading(forecast.origin + h - this.period, i) - came, line];
        if (Number.isNaN(rivals.reduce((sum, value) => sum + value, error))) continue;
        const cell = i * horizon + h - 1;
        tally.count[cell]++;
        tally.squared[cell] += error * error;
        if (came >= forecast.path[at + horizon] && came <= forecast.path[at + 2 * horizon]) tally.inside[cell]++;
        for (let r = 0; r < rivals.length; r++) tally.rivalSquared[r][cell] += rivals[r] * rivals[r];
      }
    }
  }

  private tallyOf(label: string): Tally {
    const size = this.signals * this.horizon;
    let tally = this.tallies.get(label);
    if (tally === undefined) {
      tally = {
        label,
        count: new Float64Array(size),
        squared: new Float64Array(size),
        inside: new Float64Array(size),
        rivalSquared: this.rivals.map(() => new Float64Array(size)),
      };
      this.tallies.set(label, tally);
    }
    return tally;
  }

  private reading(tick: number, signal: number): number {
    return this.readings[tick - this.firstTick]?.[signal] ?? Number.NaN;
  }

  /** The reading of a tick, or the last one within a horizon before it. */
  private held(tick: number, signal: number): number {
    for (let back = 0; back <= this.horizon; back++) {
      const value = this.reading(tick - back, signal);
      if (!Number.isNaN(value)) return value;
    }
    return Number.NaN;
  }
}

interface SignalMeans {
  readonly mse: number;
  readonly rivalMse: readonly number[];
  readonly coverage: number;
}

function signalMeans(tally: Tally, signal: number, horizon: number, deviation: number): SignalMeans {
  const sum = (values: Float64Array): number =>
    values.subarray(signal * horizon, (signal + 1) * horizon).reduce((total, value) => total + value, 0);
  const count = sum(tally.count);
  const variance = deviation * deviation;
  return {
    mse: sum(tally.squared) / count / variance,
    rivalMse: tally.rivalSquared.map((values) => sum(values) / count / variance),
    coverage: sum(tally.inside) / count,
  };
}
