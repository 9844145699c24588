/**
 * What the other channels say of each signal, by ridge regression at the same tick, and how far the cumulative sum of the
 * differences goes by itself. A signal is watched only where the others tell most of it, and where the calibration part
 * agrees with the learning part: a plant whose channels part by themselves would raise an alarm every season.
 */

import { dequantise, quantiseTensor } from '@stillwell/protocol';
import { type Agreement, ALLOWANCE, MOST_DIFFERENCE } from '@stillwell/runtime/filter';
import { solveGeneral } from '../linalg/solve.ts';
import type { Filled } from './fill.ts';

/** Penalty of the regression, as a share of each channel's own variance. */
const PENALTY = 0.001;
/** Share of a signal's variance that the others must tell. */
const LEAST_TOLD = 0.5;
/** The sum may go so many times further in the calibration part than in the learning part. */
const MOST_FURTHER = 3;
/** The limit lies at so many times the furthest that the sum went by itself. */
const BEYOND = 2;
/** Ticks with all readings, in either part, below which nothing is watched. */
const FEWEST_TICKS = 200;

/**
 * The agreement of a history; null where no signal can be watched.
 *
 * shapes  filled (nc); weights (ny × nc) as the bundle will hold them
 * units   standardised
 * throws  nothing
 * source  regression control: Mandel, J. Quality Technology 1 (1969); cumulative sums: Page, Biometrika 41 (1954)
 * cost    O(T nc²) + O(ny nc³)
 */
export function learnAgreement(
  filled: Filled,
  signalCount: number,
  learnTicks: number,
  calibrateTicks: number,
): Agreement | null {
  const nc = filled.values.length;
  const learn = wholeTicks(filled, 0, learnTicks);
  const later = wholeTicks(filled, learnTicks, learnTicks + calibrateTicks);
  if (nc < 2 || learn.length < FEWEST_TICKS || later.length < FEWEST_TICKS) return null;
  const { mean, covariance } = spread(filled.values, learn);
  const raw = new Float64Array(signalCount * nc);
  for (let i = 0; i < signalCount; i++) raw.set(regression(covariance, nc, i), i * nc);
  const weights = dequantise(quantiseTensor(raw, signalCount, nc, 'i16'));
  const [offset, scale, limit] = [0, 1, 2].map(() => new Float64Array(signalCount));
  for (let i = 0; i < signalCount; i++) {
    const row = weights.subarray(i * nc, (i + 1) * nc);
    offset[i] = mean[i] - dot(row, mean);
    const own = covariance[i * nc + i];
    const differences = differencesOf(filled.values, row, i, offset[i]);
    scale[i] = Math.sqrt(learn.reduce((sum, t) => sum + differences[t] * differences[t], 0) / learn.length);
    if (!(own > 0 && scale[i] > 0 && scale[i] * scale[i] <= (1 - LEAST_TOLD) * own)) continue;
    const [before, after] = [learn, later].map((ticks) => furthest(differences, ticks, scale[i]));
    if (after <= MOST_FURTHER * before) limit[i] = BEYOND * Math.max(before, after);
  }
  for (let i = 0; i < signalCount; i++) if (limit[i] === 0) weights.fill(0, i * nc, (i + 1) * nc);
  return limit.some((value) => value > 0) ? { weights, offset, scale: scale.map((value) => value || 1), limit } : null;
}

/** Ticks at which every channel was read and none is excluded. */
function wholeTicks({ isRead, inLongGap }: Filled, from: number, to: number): number[] {
  const ticks: number[] = [];
  for (let t = from; t < to; t++) {
    if (inLongGap[t] !== 0) continue;
    let c = 0;
    while (c < isRead.length && isRead[c][t] === 1) c++;
    if (c === isRead.length) ticks.push(t);
  }
  return ticks;
}

function spread(
  values: readonly Float64Array[],
  ticks: readonly number[],
): { readonly mean: Float64Array; readonly covariance: Float64Array } {
  const nc = values.length;
  const mean = Float64Array.from(values, (y) => {
    let sum = 0;
    for (let k = 0; k < ticks.length; k++) sum += y[ticks[k]];
    return sum / ticks.length;
  });
  const covariance = new Float64Array(nc * nc);
  for (let i = 0; i < nc; i++) {
    for (let j = 0; j <= i; j++) {
      const [one, other, oneMean, otherMean] = [values[i], values[j], mean[i], mean[j]];
      let sum = 0;
      for (let k = 0; k < ticks.length; k++) sum += (one[ticks[k]] - oneMean) * (other[ticks[k]] - otherMean);
      covariance[i * nc + j] = sum / ticks.length;
      covariance[j * nc + i] = sum / ticks.length;
    }
  }
  return { mean, covariance };
}

/** (nc) of signal i on all other channels; zeros where there is nothing to go by. */
function regression(covariance: Float64Array, nc: number, i: number): Float64Array {
  const others = Array.from({ length: nc }, (_, c) => c).filter((c) => c !== i && covariance[c * nc + c] > 0);
  const n = others.length;
  const gram = new Float64Array(n * n);
  others.forEach((row, a) => {
    others.forEach((col, b) => {
      gram[a * n + b] = covariance[row * nc + col] * (a === b ? 1 + PENALTY : 1);
    });
  });
  const out = new Float64Array(nc);
  const solved = solveGeneral(
    gram,
    Float64Array.from(others, (c) => covariance[c * nc + i]),
    n,
    1,
  );
  if (solved !== null)
    others.forEach((c, a) => {
      out[c] = solved[a];
    });
  return out;
}

function differencesOf(values: readonly Float64Array[], row: Float64Array, i: number, offset: number): Float64Array {
  const out = new Float64Array(values[i].length);
  for (let c = 0; c < values.length; c++) {
    const weight = row[c];
    const y = values[c];
    for (let t = 0; t < out.length; t++) out[t] += weight * y[t];
  }
  const own = values[i];
  for (let t = 0; t < out.length; t++) out[t] = own[t] - offset - out[t];
  return out;
}

/** How far either cumulative sum goes, as the filter computes it. */
function furthest(differences: Float64Array, ticks: readonly number[], scale: number): number {
  let above = 0;
  let below = 0;
  let most = 0;
  for (let k = 0; k < ticks.length; k++) {
    const share = Math.min(MOST_DIFFERENCE, Math.max(-MOST_DIFFERENCE, differences[ticks[k]] / scale));
    above = Math.max(0, above + share - ALLOWANCE);
    below = Math.max(0, below - share - ALLOWANCE);
    most = Math.max(most, above, below);
  }
  return most;
}

function dot(a: Float64Array, b: Float64Array): number {
  return a.reduce((sum, value, k) => sum + value * b[k], 0);
}
