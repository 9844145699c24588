/** Values of the near-discrete signals in each mode: a pump's current leans on the level it lifts from. */
import type { SwitchedSection } from '@stillwell/runtime/filter';
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import type { Modes } from './modes.ts';

const SLOPE_PRIOR = 20;

/**
 * What each mode says of each near-discrete signal: a constant, and slopes on the driven ones.
 *
 * shapes  as SwitchedSection
 * units   standardised
 * throws  TrainError 'fit' if a solve fails
 * source  ridge about the means of the mode's ticks
 * cost    O(M k T n²)
 */
export function fitSlopes(
  values: readonly Float64Array[],
  isRead: readonly Uint8Array[],
  modes: Modes,
  driven: readonly number[],
  ticks: number,
): Pick<SwitchedSection, 'centre' | 'spread' | 'slope'> {
  const { count: M, discrete } = modes;
  const k = discrete.length;
  const n = driven.length;
  const centre = modes.centre.slice();
  const slope = new Float64Array(M * k * n);
  const squares = new Float64Array(k);
  const counts = new Float64Array(k);
  for (let m = 0; m < M; m++) {
    for (let s = 0; s < k; s++) {
      const rows: number[] = [];
      for (let t = 1; t < ticks; t++) {
        if (modes.of[t] !== m || modes.of[t - 1] !== m) continue;
        if (driven.every((i) => isRead[i][t] === 1)) rows.push(t);
      }
      const beta = slopeOf(
        values[discrete[s]],
        driven.map((i) => values[i]),
        rows,
        centre[m * k + s],
      );
      centre[m * k + s] = beta[0];
      for (let j = 0; j < n; j++) slope[(m * k + s) * n + j] = beta[1 + j];
      for (const t of rows) {
        let rest = values[discrete[s]][t] - beta[0];
        for (let j = 0; j < n; j++) rest -= beta[1 + j] * values[driven[j]][t];
        squares[s] += rest * rest;
      }
      counts[s] += rows.length;
    }
  }
  const spread = squares.map((sum, s) => Math.max(1e-3, Math.sqrt(sum / Math.max(1, counts[s]))));
  return { centre, spread, slope };
}

function slopeOf(
  y: Float64Array,
  driven: readonly Float64Array[],
  rows: readonly number[],
  otherwise: number,
): Float64Array {
  const n = driven.length;
  const out = new Float64Array(1 + n);
  out[0] = otherwise;
  if (rows.length < 8) return out;
  const mean = driven.map((z) => rows.reduce((sum, t) => sum + z[t], 0) / rows.length);
  const level = rows.reduce((sum, t) => sum + y[t], 0) / rows.length;
  const gram = new Float64Array(n * n);
  const right = new Float64Array(n);
  for (const t of rows) {
    for (let a = 0; a < n; a++) {
      const x = driven[a][t] - mean[a];
      right[a] += x * (y[t] - level);
      for (let b = 0; b < n; b++) gram[a * n + b] += x * (driven[b][t] - mean[b]);
    }
  }
  for (let a = 0; a < n; a++) gram[a * (n + 1)] += SLOPE_PRIOR;
  solveCholesky(cholesky(gram, n), n, right, 1);
  out[0] = level;
  for (let a = 0; a < n; a++) {
    out[1 + a] = right[a];
    out[0] -= right[a] * mean[a];
  }
  return out;
}
