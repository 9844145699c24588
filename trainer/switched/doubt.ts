/**
 * How far the outlook may miss: two curves over the horizon, and a scale that follows the features, since a forecast made in
 * a storm misses more than one made on a dry night.
 */
import { LEAST_DOUBT, MOST_DOUBT } from '@stillwell/runtime/filter';
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { symmetricEigen } from '../linalg/eigen.ts';
import { multiply, multiplyTransposed } from '../linalg/products.ts';

/**
 * Two main curves of the misses of each signal's sums, scaled so that a standard normal number times them makes them up,
 * and the scale's weights.
 *
 * shapes  features (T × 2F), sums (n) of (T + 1), map (2F × n·H); doubt (n × 2 × H), doubtScale (n × (1 + F))
 * units   standardised
 * throws  TrainError 'fit' if a solve fails
 * source  principal components; the scale by weighted least squares of the misses' sizes
 * cost    O(origins · (F² + F n H + H²))
 */
export function doubtOf(
  features: Float64Array,
  width: number,
  sums: readonly Float64Array[],
  horizon: number,
  learnTicks: number,
  map: Float64Array,
): { doubt: Float64Array; doubtScale: Float64Array } {
  const n = sums.length;
  const half = width / 2;
  const columns = n * horizon;
  const stride = Math.max(1, Math.floor((learnTicks - horizon) / MOST_DOUBT_ORIGINS));
  const origins: number[] = [];
  for (let t = 0; t < learnTicks - horizon; t += stride) origins.push(t);
  const misses = sums.map(() => new Float64Array(origins.length * horizon));
  origins.forEach((t, row) => {
    const forecast = multiply(features.subarray(t * width, (t + 1) * width), map, 1, width, columns);
    for (let i = 0; i < n; i++) {
      for (let h = 0; h < horizon; h++) {
        misses[i][row * horizon + h] = sums[i][t + 2 + h] - sums[i][t + 1] - forecast[i * horizon + h];
      }
    }
  });
  const doubt = new Float64Array(n * 2 * horizon);
  const doubtScale = new Float64Array(n * (1 + half));
  misses.forEach((own, i) => {
    const weights = fitScale(features, width, origins, own, horizon);
    doubtScale.set(weights, i * (1 + half));
    const even = own.slice();
    origins.forEach((t, row) => {
      const scale = scaleAt(weights, features, t * width, half);
      for (let h = 0; h < horizon; h++) even[row * horizon + h] /= scale;
    });
    const kept = usualRows(even, origins.length, horizon);
    const count = kept.length / horizon;
    const covariance = multiplyTransposed(kept, kept, horizon, count, horizon);
    const { values, vectors } = symmetricEigen(covariance, horizon);
    for (let k = 0; k < Math.min(2, horizon); k++) {
      const size = Math.sqrt(Math.max(0, values[k]) / Math.max(1, count));
      let before = 0;
      for (let h = 0; h < horizon; h++) {
        const sum = size * vectors[h * horizon + k];
        doubt[(2 * i + k) * horizon + h] = sum - before;
        before = sum;
      }
    }
  });
  return { doubt, doubtScale };
}

/** Rows whose last entry lies within a few robust deviations: what the scale could not foresee is not to widen all. */
function usualRows(rows: Float64Array, count: number, horizon: number): Float64Array {
  const sizes = Float64Array.from({ length: count }, (_, row) => Math.abs(rows[(row + 1) * horizon - 1]));
  const far = USUAL_SD * 1.4826 * (sizes.slice().sort()[count >> 1] ?? 0);
  const out: number[] = [];
  for (let row = 0; row < count; row++) {
    if (sizes[row] <= far) for (let h = 0; h < horizon; h++) out.push(rows[row * horizon + h]);
  }
  return Float64Array.from(out);
}

const USUAL_SD = 2.5;
const MOST_DOUBT_ORIGINS = 5000;
const SCALE_ROUNDS = 4;

/** Weights of the misses' size on a constant and the features' sizes; those that would lessen it are left out. */
function fitScale(
  features: Float64Array,
  width: number,
  origins: readonly number[],
  misses: Float64Array,
  horizon: number,
): Float64Array {
  const half = width / 2;
  const size = Float64Array.from(origins, (_, row) => {
    let sum = 0;
    for (let h = 0; h < horizon; h++) sum += Math.abs(misses[row * horizon + h]) / Math.sqrt(h + 1);
    return sum;
  });
  const mean = size.reduce((sum, one) => sum + one, 0) / Math.max(1, size.length) || 1;
  const out = new Float64Array(1 + half);
  let kept = Array.from({ length: 1 + half }, (_, f) => f);
  for (let round = 0; round < SCALE_ROUNDS; round++) {
    const m = kept.length;
    const gram = new Float64Array(m * m);
    const right = new Float64Array(m);
    const row = new Float64Array(m);
    origins.forEach((t, at) => {
      // Large misses are rare and wild: each counts by the inverse of its expected size.
      let expected = 1;
      for (let f = 0; f < half; f++) expected += 0.3 * Math.abs(features[t * width + f]);
      kept.forEach((f, k) => {
        row[k] = (f === 0 ? 1 : Math.abs(features[t * width + f - 1])) / expected;
      });
      for (let a = 0; a < m; a++) {
        right[a] += (row[a] * size[at]) / (mean * expected);
        for (let b = 0; b <= a; b++) gram[a * m + b] += row[a] * row[b];
      }
    });
    let trace = 0;
    for (let a = 0; a < m; a++) trace += gram[a * (m + 1)];
    for (let a = 0; a < m; a++) gram[a * (m + 1)] += (1e-3 * trace) / m + 1e-9;
    solveCholesky(cholesky(gram, m), m, right, 1);
    out.fill(0);
    kept.forEach((f, k) => {
      out[f] = Math.max(0, right[k]);
    });
    const next = kept.filter((f, k) => f === 0 || right[k] > 0);
    if (next.length === kept.length) break;
    kept = next;
  }
  return out;
}

/** As the filter's. */
function scaleAt(weights: Float64Array, features: Float64Array, at: number, half: number): number {
  let scale = weights[0];
  for (let f = 0; f < half; f++) scale += weights[1 + f] * Math.abs(features[at + f]);
  return Math.max(LEAST_DOUBT, Math.min(MOST_DOUBT, scale));
}
