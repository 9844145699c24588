/**
 * What moves the driven signals beside the modes: the disturbance, tick by tick, its season, and the means of its past
 * that the filter will remember. The same steps as the filter's, with ticks of a switch passed over.
 */
import { type Drift, type DrivenHistory, isSteady } from './drift.ts';

/** The disturbance of every driven signal. */
export interface Disturbance {
  /** (n) of (ticks): what is left of the change after mode and season; NaN where not steady. */
  readonly w: readonly Float64Array[];
  /** (n) largest size believed. */
  readonly limit: Float64Array;
  /** (n × bins), bins 1 and zeros where there is no period. */
  readonly season: Float64Array;
  readonly bins: number;
  readonly periodTicks: number;
}

const MOST_BINS = 48;
/** Periods from which a season is worth learning. */
const LEAST_PERIODS = 5;
/** Limit in robust standard deviations. */
const LIMIT_SD = 12;
/** Gain of the mean that counts as lasting, and how much larger a disturbance than the largest such mean is believed. */
const LASTING_SHARE = 0.2;
const LASTING_ROOM = 4;
/** A disturbance twice as strong as all the equipment together is believed, whatever was seen. */
const DRIFT_ROOM = 2;

/**
 * Works out the disturbance over the whole history; season and limits from the part learned from.
 *
 * shapes  firstTick the number of the history's first tick
 * units   standardised
 * throws  nothing
 * source  none
 * cost    O(n² T)
 */
export function findDisturbance(
  history: DrivenHistory,
  { drift, coupling }: Drift,
  periodTicks: number,
  firstTick: number,
): Disturbance {
  const { values, mode } = history;
  const n = values.length;
  const T = values[0].length;
  const hasSeason = periodTicks > 1 && history.ticks >= LEAST_PERIODS * periodTicks;
  const bins = hasSeason ? Math.min(MOST_BINS, periodTicks) : 1;
  const season = new Float64Array(n * bins);
  const limit = new Float64Array(n);
  const w = values.map((z, i) => {
    const out = new Float64Array(T).fill(Number.NaN);
    for (let t = 1; t < T; t++) {
      if (!isSteady(history, i, t)) continue;
      const row = mode[t] * n + i;
      let rest = z[t] - z[t - 1] - drift[row];
      for (let j = 0; j < n; j++) rest -= coupling[row * n + j] * values[j][t - 1];
      out[t] = rest;
    }
    if (hasSeason) {
      season.set(seasonOf(out.subarray(0, history.ticks), periodTicks, bins, firstTick), i * bins);
      for (let t = 0; t < T; t++) out[t] -= seasonAt(season, i * bins, bins, periodTicks, firstTick + t);
    }
    const reach = DRIFT_ROOM * spanOf(drift, n, i);
    limit[i] = Math.max(reach, limitOf(out.subarray(0, history.ticks)));
    return out;
  });
  return { w, limit, season, bins, periodTicks: hasSeason ? periodTicks : 0 };
}

/** Mean of each bin, robust against single wild ticks by the caller's limits alone: bins hold many ticks. */
function seasonOf(w: Float64Array, period: number, bins: number, firstTick: number): Float64Array {
  const sum = new Float64Array(bins);
  const count = new Float64Array(bins);
  const far = LIMIT_SD * robustSd(w);
  for (let t = 0; t < w.length; t++) {
    if (!(Math.abs(w[t]) <= far)) continue;
    const bin = Math.floor((((firstTick + t) % period) * bins) / period);
    sum[bin] += w[t];
    count[bin]++;
  }
  const mean = sum.map((value, b) => (count[b] > 0 ? value / count[b] : 0));
  // Neighbours share what they saw: a quarter, a half, a quarter.
  return mean.map((value, b) => (mean[(b + bins - 1) % bins] + 2 * value + mean[(b + 1) % bins]) / 4);
}

/** As the filter's: straight lines between the middles of the bins. */
function seasonAt(season: Float64Array, from: number, bins: number, period: number, tick: number): number {
  const at = ((tick % period) * bins) / period - 0.5;
  const floor = Math.floor(at);
  const left = season[from + ((floor + bins) % bins)];
  return left + (at - floor) * (season[from + ((floor + 1) % bins)] - left);
}

/**
 * Largest disturbance believed: far beyond the ordinary, and beyond the longest lasting seen, since a flood is no error.
 */
function limitOf(w: Float64Array): number {
  let mean = 0;
  let most = 0;
  for (const value of w) {
    if (Number.isNaN(value)) continue;
    mean += LASTING_SHARE * (value - mean);
    most = Math.max(most, Math.abs(mean));
  }
  return Math.max(LIMIT_SD * robustSd(w), LASTING_ROOM * most);
}

/** From the least to the largest drift of a signal over the modes. */
function spanOf(drift: Float64Array, n: number, i: number): number {
  const own = drift.filter((_, at) => at % n === i);
  return Math.max(...own) - Math.min(...own);
}

/** Standard deviation by the 16th and 84th percentile, or the plain one where they coincide. */
function robustSd(w: Float64Array): number {
  const sorted = w.filter((value) => !Number.isNaN(value)).sort();
  if (sorted.length < 8) return 1;
  const spread = (sorted[Math.floor(0.84 * sorted.length)] - sorted[Math.floor(0.16 * sorted.length)]) / 2;
  let squares = 0;
  for (const value of sorted) squares += value * value;
  const plain = Math.sqrt(squares / sorted.length);
  return Math.max(spread, 0.1 * plain, 1e-6);
}
