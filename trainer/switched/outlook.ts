/**
 * How the disturbance goes on: the sum of its next h steps by ridge regression on exponential means of its past and on the
 * inputs, a few curves over the horizon, and two more curves for how far it may miss.
 */

import { FLOOD_MEAN, SWITCHED_BEND, SWITCHED_FEATURE_LIMIT } from '@stillwell/runtime/filter';
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { symmetricEigen } from '../linalg/eigen.ts';
import { multiply, multiplyTransposed, transpose } from '../linalg/products.ts';
import type { Disturbance } from './disturbance.ts';
import { doubtOf } from './doubt.ts';

/** The outlook as SwitchedSection has it. */
export interface Outlook {
  readonly decays: Float64Array;
  readonly featureScale: Float64Array;
  /** (n) */
  readonly floodFrom: Float64Array;
  /** (n·r × F) */
  readonly outlook: Float64Array;
  /** (H × r) */
  readonly outlookBasis: Float64Array;
  readonly basisCount: number;
  /** (n × 2 × H) */
  readonly doubt: Float64Array;
  /** (n × (1 + F)) */
  readonly doubtScale: Float64Array;
  /** (T × 2F) scaled features of every tick. */
  readonly features: Float64Array;
}

/** Time constants in ticks; those up to the period, or a few horizons, are used. */
const LADDER = [1.5, 4, 10, 25, 60, 150, 400, 1000];
const MOST_CURVES = 6;
const PENALTIES = [1e-4, 1e-3, 1e-2, 1e-1];
/** Share of the learning part that chooses the penalty. */
const CHOOSING_SHARE = 0.2;

/**
 * Learns the outlook.
 *
 * shapes  inputs (v) of (T) standardised; learnTicks the ticks learned from
 * units   standardised
 * throws  TrainError 'fit' if a solve fails
 * source  ridge: Hoerl & Kennard (1970); curves: principal components over the horizon
 * cost    O(T (F² + F n H))
 */
export function fitOutlook(
  disturbance: Disturbance,
  inputs: readonly Float64Array[],
  horizon: number,
  learnTicks: number,
): Outlook {
  const { w, limit } = disturbance;
  const n = w.length;
  const slowest = Math.max(2 * horizon, disturbance.periodTicks / 2);
  const decays = Float64Array.from(
    LADDER.filter((tau) => tau <= slowest),
    (tau) => Math.exp(-1 / tau),
  );
  const half = n * decays.length + inputs.length * (decays.length + 1);
  const plain = gatherFeatures(w, limit, inputs, decays, half);
  const featureScale = scaleFeatures(plain, half, learnTicks);
  const features = bend(plain, half);
  const floodFrom = floodFromOf(plain, half, featureScale, n, decays.length, learnTicks);
  const width = 2 * half;
  const sums = w.map((one, i) => cumulate(one, limit[i]));
  const stride = Math.max(1, Math.floor((learnTicks - horizon) / 30_000));
  const cut = Math.floor((1 - CHOOSING_SHARE) * learnTicks);
  const early = momentsOf(features, width, sums, horizon, 0, cut - horizon, stride);
  const late = momentsOf(features, width, sums, horizon, cut, learnTicks - horizon, stride);
  let best = PENALTIES[0];
  let least = Number.POSITIVE_INFINITY;
  for (const penalty of PENALTIES) {
    const error = errorOf(late, solve(early, penalty), width);
    if (error >= least) continue;
    least = error;
    best = penalty;
  }
  const all = momentsOf(features, width, sums, horizon, 0, learnTicks - horizon, stride);
  const map = solve(all, best);
  const small = shrink(map, all, width, n, horizon);
  const rebuilt = rebuild(small.outlook, small.outlookBasis, n, horizon, width, small.basisCount);
  const doubts = doubtOf(features, width, sums, horizon, learnTicks, rebuilt);
  return { decays, featureScale, floodFrom, ...small, ...doubts, features };
}

/** (T × F) raw features: means of the disturbance, then each input's value and means. */
function gatherFeatures(
  w: readonly Float64Array[],
  limit: Float64Array,
  inputs: readonly Float64Array[],
  decays: Float64Array,
  width: number,
): Float64Array {
  const T = w[0].length;
  const K = decays.length;
  const out = new Float64Array(T * width);
  const memory = new Float64Array(width);
  for (let t = 0; t < T; t++) {
    let f = 0;
    for (let i = 0; i < w.length; i++) {
      const isFelt = !Number.isNaN(w[i][t]);
      const value = isFelt ? Math.max(-limit[i], Math.min(limit[i], w[i][t])) : 0;
      for (let k = 0; k < K; k++, f++) {
        if (isFelt) memory[f] = decays[k] * memory[f] + (1 - decays[k]) * value;
      }
    }
    for (const input of inputs) {
      memory[f++] = input[t];
      for (let k = 0; k < K; k++, f++) {
        memory[f] = t === 0 ? input[0] : decays[k] * memory[f] + (1 - decays[k]) * input[t];
      }
    }
    out.set(memory, t * width);
  }
  return out;
}

/** Brings each feature to standard deviation one in the learning part, clipped as the filter clips; the scales. */
function scaleFeatures(features: Float64Array, width: number, learnTicks: number): Float64Array {
  const scale = new Float64Array(width);
  for (let f = 0; f < width; f++) {
    let sum = 0;
    for (let t = 0; t < learnTicks; t++) sum += features[t * width + f] ** 2;
    scale[f] = sum > 0 ? 1 / Math.sqrt(sum / learnTicks) : 1;
  }
  for (let k = 0; k < features.length; k++) {
    const scaled = features[k] * scale[k % width];
    features[k] = Math.max(-SWITCHED_FEATURE_LIMIT, Math.min(SWITCHED_FEATURE_LIMIT, scaled));
  }
  return scale;
}

/** A flood begins this far beyond the largest mean seen. */
const FLOOD_ROOM = 1.25;

/** (n) size of each signal's mean, of the kind the filter looks at, beyond which a disturbance counts as a flood. */
function floodFromOf(
  plain: Float64Array,
  half: number,
  scale: Float64Array,
  n: number,
  K: number,
  learnTicks: number,
): Float64Array {
  return Float64Array.from({ length: n }, (_, i) => {
    const at = i * K + Math.min(FLOOD_MEAN, K - 1);
    let most = 0;
    for (let t = 0; t < learnTicks; t++) most = Math.max(most, Math.abs(plain[t * half + at]));
    return (FLOOD_ROOM * most) / scale[at];
  });
}

/** Each row followed by its parts beyond the bend. */
function bend(plain: Float64Array, half: number): Float64Array {
  const out = new Float64Array(2 * plain.length);
  for (let k = 0; k < plain.length; k++) {
    const at = Math.floor(k / half) * 2 * half + (k % half);
    out[at] = plain[k];
    out[at + half] = plain[k] - Math.max(-SWITCHED_BEND, Math.min(SWITCHED_BEND, plain[k]));
  }
  return out;
}

/** Running sum; ticks that tell nothing are bridged by the mean of what stands around them. */
function cumulate(w: Float64Array, limit: number): Float64Array {
  const out = new Float64Array(w.length + 1);
  let before = 0;
  for (let t = 0; t < w.length; t++) {
    let value = Math.max(-limit, Math.min(limit, w[t]));
    if (Number.isNaN(value)) {
      let after = t;
      while (after < w.length && Number.isNaN(w[after])) after++;
      const right = after < w.length && after - t < 8 ? (w[after] + (w[after + 1] || w[after])) / 2 : before;
      value = Math.max(-limit, Math.min(limit, (before + right) / 2));
    } else before = Number.isNaN(w[t - 1]) ? value : (value + before) / 2;
    out[t + 1] = out[t] + value;
  }
  return out;
}

interface SumMoments {
  readonly gram: Float64Array;
  readonly right: Float64Array;
  readonly energy: Float64Array;
  readonly origins: number;
  readonly width: number;
  readonly columns: number;
}

function momentsOf(
  features: Float64Array,
  width: number,
  sums: readonly Float64Array[],
  horizon: number,
  from: number,
  to: number,
  stride: number,
): SumMoments {
  const columns = sums.length * horizon;
  const gram = new Float64Array(width * width);
  const right = new Float64Array(width * columns);
  const energy = new Float64Array(columns);
  const block = 256;
  const x = new Float64Array(block * width);
  const y = new Float64Array(block * columns);
  let rows = 0;
  let origins = 0;
  const flush = (): void => {
    const g = multiplyTransposed(x.subarray(0, rows * width), x.subarray(0, rows * width), width, rows, width);
    const c = multiplyTransposed(x.subarray(0, rows * width), y.subarray(0, rows * columns), width, rows, columns);
    for (let k = 0; k < g.length; k++) gram[k] += g[k];
    for (let k = 0; k < c.length; k++) right[k] += c[k];
    for (let k = 0; k < rows * columns; k++) energy[k % columns] += y[k] * y[k];
    rows = 0;
  };
  for (let t = from; t < to; t += stride) {
    x.set(features.subarray(t * width, (t + 1) * width), rows * width);
    for (let i = 0; i < sums.length; i++) {
      for (let h = 1; h <= horizon; h++) y[rows * columns + i * horizon + h - 1] = sums[i][t + 1 + h] - sums[i][t + 1];
    }
    rows++;
    origins++;
    if (rows === block) flush();
  }
  if (rows > 0) flush();
  return { gram, right, energy, origins: Math.max(1, origins), width, columns };
}

function solve(moments: SumMoments, penalty: number): Float64Array {
  const { width, columns } = moments;
  const gram = moments.gram.slice();
  let trace = 0;
  for (let f = 0; f < width; f++) trace += gram[f * (width + 1)];
  for (let f = 0; f < width; f++) gram[f * (width + 1)] += penalty * (trace / width) + 1e-9;
  const map = moments.right.slice();
  solveCholesky(cholesky(gram, width), width, map, columns);
  return map;
}

/** Sum over columns of the squared error relative to the energy. */
function errorOf(moments: SumMoments, map: Float64Array, width: number): number {
  const { columns, gram, right, energy } = moments;
  const pushed = multiply(gram, map, width, width, columns);
  let sum = 0;
  for (let c = 0; c < columns; c++) {
    let error = energy[c];
    for (let f = 0; f < width; f++)
      error += map[f * columns + c] * (pushed[f * columns + c] - 2 * right[f * columns + c]);
    if (energy[c] > 0) sum += error / energy[c];
  }
  return sum;
}

/** A few curves over the horizon, shared by all driven signals. */
function shrink(
  map: Float64Array,
  moments: SumMoments,
  width: number,
  n: number,
  horizon: number,
): { outlook: Float64Array; outlookBasis: Float64Array; basisCount: number } {
  const basisCount = Math.min(MOST_CURVES, horizon);
  const columns = n * horizon;
  const pushed = multiply(moments.gram, map, width, width, columns);
  const covariance = multiplyTransposed(map, pushed, columns, width, columns);
  const gram = new Float64Array(horizon * horizon);
  for (let i = 0; i < n; i++) {
    let trace = 0;
    for (let h = 0; h < horizon; h++) trace += covariance[(i * horizon + h) * columns + i * horizon + h];
    for (let g = 0; g < horizon; g++) {
      for (let h = 0; h < horizon; h++) {
        const weight = 1 / ((g + 1) * (h + 1) * (trace || 1));
        gram[g * horizon + h] += weight * covariance[(i * horizon + g) * columns + i * horizon + h];
      }
    }
  }
  for (let g = 0; g < horizon; g++) for (let h = 0; h < g; h++) gram[h * horizon + g] = gram[g * horizon + h];
  const { vectors } = symmetricEigen(gram, horizon);
  const outlookBasis = new Float64Array(horizon * basisCount);
  const across = new Float64Array(horizon * basisCount);
  for (let h = 0; h < horizon; h++) {
    for (let k = 0; k < basisCount; k++) {
      outlookBasis[h * basisCount + k] = vectors[h * horizon + k] * (h + 1);
      across[h * basisCount + k] = vectors[h * horizon + k] / (h + 1);
    }
  }
  // Weighted by 1 / h the curves are orthonormal: coefficients are plain products.
  const outlook = new Float64Array(n * basisCount * width);
  const byColumn = transpose(map, width, columns);
  for (let i = 0; i < n; i++) {
    const rows = byColumn.subarray(i * horizon * width, (i + 1) * horizon * width);
    outlook.set(multiplyTransposed(across, rows, basisCount, horizon, width), i * basisCount * width);
  }
  return { outlook, outlookBasis, basisCount };
}

/** (F × n·H) map of the small form. */
function rebuild(
  outlook: Float64Array,
  basis: Float64Array,
  n: number,
  horizon: number,
  width: number,
  basisCount: number,
): Float64Array {
  const columns = n * horizon;
  const byColumn = new Float64Array(columns * width);
  for (let i = 0; i < n; i++) {
    const rows = outlook.subarray(i * basisCount * width, (i + 1) * basisCount * width);
    byColumn.set(multiply(basis, rows, horizon, basisCount, width), i * horizon * width);
  }
  return transpose(byColumn, columns, width);
}
