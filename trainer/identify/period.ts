/**
 * The period the bank's resonators sit on: the day where a day is between 4 and 2000 ticks and the history holds enough
 * of them, otherwise the strongest peak of the signals' averaged spectrum that stands clear of its surroundings.
 */
import { fourier } from '../linalg/fourier.ts';

const DAY_MS = 86_400_000;
const SHORTEST_PERIOD_TICKS = 4;
const LONGEST_PERIOD_TICKS = 2000;
/** A period must have come round this often in the learning part. */
const LEAST_PERIODS = 3;
/** Power of a peak over the median of its surroundings; averaged Hann segments of plain red noise stay below it. */
const CLEAR_RATIO = 12;
const LONGEST_SEGMENT = 4096;

/**
 * Ticks in the period, or 0 where there is none.
 *
 * shapes  values (n) of (learnTicks), complete
 * units   standardised; result in ticks
 * throws  nothing
 * source  averaged periodogram: Welch, IEEE Trans. Audio and Electroacoustics 15 (1967)
 * cost    O(n T log T)
 */
export function findPeriod(values: readonly Float64Array[], tickMs: number): number {
  const ticks = values[0].length;
  const day = Math.round(DAY_MS / tickMs);
  if (day >= SHORTEST_PERIOD_TICKS && day <= LONGEST_PERIOD_TICKS && ticks >= LEAST_PERIODS * day) return day;
  let size = 64;
  while (size * 2 <= Math.min(ticks / 2, LONGEST_SEGMENT)) size *= 2;
  if (ticks < size) return 0;
  const power = new Float64Array(size / 2);
  for (const y of values) addPeriodogram(power, y, size);
  return peakPeriod(power, size);
}

/** Adds the signal's averaged spectrum, its total made 1 so that no signal speaks louder than another. */
function addPeriodogram(power: Float64Array, y: Float64Array, size: number): void {
  const own = new Float64Array(power.length);
  for (let from = 0; from + size <= y.length; from += size / 2) {
    const re = new Float64Array(size);
    const im = new Float64Array(size);
    let mean = 0;
    for (let t = 0; t < size; t++) mean += y[from + t] / size;
    for (let t = 0; t < size; t++) re[t] = (y[from + t] - mean) * (0.5 - 0.5 * Math.cos((2 * Math.PI * t) / size));
    fourier(re, im);
    for (let k = 1; k < own.length; k++) own[k] += re[k] * re[k] + im[k] * im[k];
  }
  const total = own.reduce((sum, value) => sum + value, 0);
  if (total > 0) for (let k = 0; k < own.length; k++) power[k] += own[k] / total;
}

function peakPeriod(power: Float64Array, size: number): number {
  let best = 0;
  let strongest = 0;
  const first = Math.max(LEAST_PERIODS, Math.ceil(size / LONGEST_PERIOD_TICKS));
  for (let k = first; k <= size / SHORTEST_PERIOD_TICKS && k < power.length - 1; k++) {
    if (power[k] < power[k - 1] || power[k] < power[k + 1] || power[k] <= strongest) continue;
    if (power[k] < CLEAR_RATIO * background(power, k)) continue;
    best = k;
    strongest = power[k];
  }
  if (best === 0) return 0;
  const left = power[best - 1];
  const right = power[best + 1];
  const bend = left - 2 * power[best] + right;
  const shift = bend === 0 ? 0 : (0.5 * (left - right)) / bend;
  return Math.round(size / (best + shift));
}

/** Median power around bin k, its own lobe left out. */
function background(power: Float64Array, k: number): number {
  const around: number[] = [];
  const reach = Math.max(6, Math.floor(k / 3));
  for (let j = Math.max(1, k - reach); j <= Math.min(power.length - 1, k + reach); j++) {
    if (Math.abs(j - k) > 2) around.push(power[j]);
  }
  around.sort((a, b) => a - b);
  return around[around.length >> 1];
}
