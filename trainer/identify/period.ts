/**
 * The periods the bank's resonators sit on: the day where a day is between 4 and 2000 ticks and the history holds enough
 * of them, otherwise the strongest peak of the signals' averaged spectrum that stands clear of its surroundings; and what
 * else comes round beside it.
 */
import { smallest } from '../history/order-statistics.ts';
import { fourier } from '../linalg/fourier.ts';

const DAY_MS = 86_400_000;
const SHORTEST_PERIOD_TICKS = 4;
const LONGEST_PERIOD_TICKS = 2000;
/** A period must have come round this often in the learning part. */
const LEAST_PERIODS = 3;
/** Power of a peak over the median of its surroundings; averaged Hann segments of plain red noise stay below it. */
const CLEAR_RATIO = 12;
/** The same for a single signal's spectrum, of which there are many. */
const OWN_RATIO = 20;
const LONGEST_SEGMENT = 4096;
/** Periods besides the first. */
const MOST_OTHERS = 2;
/** A peak this near to a harmonic of a period already taken, in bins of the spectrum or as a share, says nothing new. */
const HARMONIC_BINS = 2.5;
const HARMONIC_SHARE = 0.02;
/** Nor does one this near to the period itself: a broad peak has several tops. */
const ALIKE_SHARE = 0.2;
/** A further period need not be a whole number of ticks; a spectrum tells it to three digits. */
const DIGITS = 3;
const MAIN_HARMONICS = 12;
const OTHER_HARMONICS = 3;

/** Periods of a history, in ticks. */
export interface Periods {
  /** 0: none. */
  readonly main: number;
  /** No harmonics of it or of each other; the strongest first. */
  readonly others: readonly number[];
}

/**
 * Finds the periods: the day or the strongest peak, then what else stands clear in the spectrum of all signals or of one.
 *
 * shapes  values (n) of (learnTicks), complete
 * units   standardised; result in ticks
 * throws  nothing
 * source  averaged periodogram: Welch, IEEE Trans. Audio and Electroacoustics 15 (1967)
 * cost    O(n T log T)
 */
export function findPeriods(values: readonly Float64Array[], tickMs: number): Periods {
  const ticks = values[0].length;
  const day = Math.round(DAY_MS / tickMs);
  const isDaily = day >= SHORTEST_PERIOD_TICKS && day <= LONGEST_PERIOD_TICKS && ticks >= LEAST_PERIODS * day;
  const others: number[] = [];
  const size = segmentTicks(ticks);
  const window = Float64Array.from({ length: size }, (_, t) => 0.5 - 0.5 * Math.cos((2 * Math.PI * t) / size));
  const spectra = values.map((y) => averagedSpectrum(y, window));
  const peaks = spectralPeaks(spectra, size, ticks, CLEAR_RATIO);
  const main = isDaily ? day : (peaks.find(({ isRepeated }) => isRepeated)?.period ?? 0);
  if (main === 0) return { main, others: [] };
  const own = values.length > 1 ? spectra.flatMap((one) => spectralPeaks([one], size, ticks, OWN_RATIO)) : [];
  for (const { period, size, isRepeated } of [...peaks, ...own]) {
    if (others.length >= MOST_OTHERS) break;
    const isNew =
      !isHarmonic(period, main, size, MAIN_HARMONICS) &&
      others.every((known) => !isHarmonic(period, known, size, OTHER_HARMONICS));
    if (isNew && isRepeated) others.push(Number(period.toPrecision(DIGITS)));
  }
  return { main: Math.round(main), others };
}

interface Peak {
  /** Ticks, not rounded. */
  readonly period: number;
  /** Ticks of the segments whose spectrum was averaged. */
  readonly size: number;
  readonly isRepeated: boolean;
}

/** Whether a period's frequency is that of a harmonic of another, as nearly as the spectrum can tell. */
function isHarmonic(period: number, known: number, size: number, most: number): boolean {
  const bin = size / period;
  for (let m = 1; m <= most; m++) {
    const harmonic = (m * size) / known;
    const share = m === 1 ? ALIKE_SHARE : HARMONIC_SHARE;
    if (Math.abs(bin - harmonic) < Math.max(HARMONIC_BINS, share * harmonic)) return true;
  }
  return false;
}

/** Ticks of a segment whose spectrum is averaged; 0 where the history is too short for any. */
function segmentTicks(ticks: number): number {
  let size = 64;
  while (size * 2 <= Math.min(ticks / 2, LONGEST_SEGMENT)) size *= 2;
  return ticks < size ? 0 : size;
}

/** Peaks of some spectra together that stand clear of their surroundings, the strongest first. */
function spectralPeaks(spectra: readonly Float64Array[], size: number, ticks: number, clear: number): Peak[] {
  const power = new Float64Array(size / 2);
  for (const own of spectra) for (let k = 1; k < own.length; k++) power[k] += own[k];
  const first = Math.max(LEAST_PERIODS, Math.ceil(size / LONGEST_PERIOD_TICKS));
  const bins: number[] = [];
  for (let k = first; k <= size / SHORTEST_PERIOD_TICKS && k < power.length - 1; k++) {
    if (power[k] < power[k - 1] || power[k] < power[k + 1]) continue;
    if (power[k] >= clear * background(power, k)) bins.push(k);
  }
  bins.sort((a, b) => power[b] - power[a]);
  return bins.map((k) => {
    const period = size / (k + peakShift(power, k));
    return { period, size, isRepeated: ticks >= LEAST_PERIODS * period };
  });
}

/** Where a parabola through the logarithms of a bin and its neighbours has its top, in bins from it. */
function peakShift(power: Float64Array, k: number): number {
  const [left, top, right] = [power[k - 1], power[k], power[k + 1]].map((value) => Math.log(Math.max(value, 1e-300)));
  const bend = left - 2 * top + right;
  return bend === 0 ? 0 : (0.5 * (left - right)) / bend;
}

/** (size / 2) a signal's averaged spectrum in segments of the window's size, its total made 1 so that no signal speaks louder than another. */
function averagedSpectrum(y: Float64Array, window: Float64Array): Float64Array {
  const size = window.length;
  const own = new Float64Array(size / 2);
  const re = new Float64Array(size);
  const im = new Float64Array(size);
  for (let from = 0; size > 0 && from + size <= y.length; from += size / 2) {
    im.fill(0);
    let mean = 0;
    for (let t = 0; t < size; t++) mean += y[from + t] / size;
    for (let t = 0; t < size; t++) re[t] = (y[from + t] - mean) * window[t];
    fourier(re, im);
    for (let k = 1; k < own.length; k++) own[k] += re[k] * re[k] + im[k] * im[k];
  }
  const total = own.reduce((sum, value) => sum + value, 0);
  return total > 0 ? own.map((value) => value / total) : own.fill(0);
}

/** Median power around bin k, its own lobe left out. */
function background(power: Float64Array, k: number): number {
  const reach = Math.max(6, Math.floor(k / 3));
  const from = Math.max(1, k - reach);
  const to = Math.min(power.length - 1, k + reach);
  const around = new Float64Array(to - from + 1);
  let count = 0;
  for (let j = from; j <= to; j++) if (Math.abs(j - k) > 2) around[count++] = power[j];
  return smallest(around.subarray(0, count), count >> 1);
}
