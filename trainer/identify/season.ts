/**
 * The mean by phase of the period, where forecasts fade to in a long gap. Coarse on purpose: at most 48 bins.
 */
import type { Filled } from './fill.ts';

/** Seasonal means of the signals. */
export interface Season {
  /** 0: no period. */
  readonly periodTicks: number;
  readonly bins: number;
  /** (ny × bins) standardised */
  readonly means: Float64Array;
}

const MOST_BINS = 48;

/**
 * Means of the learning part's readings by bin, bin = floor(phase × bins / period), phase = tick mod period.
 *
 * shapes  filled from `firstTick` on, learnTicks of it used
 * units   standardised
 * throws  nothing; a bin without readings takes the overall mean
 * source  definition
 * cost    O(ny T)
 */
export function seasonOf(
  filled: Filled,
  signalCount: number,
  firstTick: number,
  learnTicks: number,
  periodTicks: number,
): Season {
  const bins = periodTicks > 0 ? Math.min(periodTicks, MOST_BINS) : 1;
  const means = new Float64Array(signalCount * bins);
  for (let i = 0; i < signalCount; i++) {
    const sum = new Float64Array(bins);
    const count = new Float64Array(bins);
    let total = 0;
    let read = 0;
    for (let t = 0; t < learnTicks; t++) {
      if (filled.isRead[i][t] === 0) continue;
      const bin = periodTicks > 0 ? Math.floor((((firstTick + t) % periodTicks) * bins) / periodTicks) : 0;
      const z = filled.values[i][t];
      sum[bin] += z;
      count[bin]++;
      total += z;
      read++;
    }
    for (let b = 0; b < bins; b++) means[i * bins + b] = count[b] > 0 ? sum[b] / count[b] : total / Math.max(1, read);
  }
  return { periodTicks, bins, means };
}
