/**
 * Rounding the rows of a projection to int8 one weight at a time, each one's error made good by the weights still to be
 * rounded, as far as the features' moments say they can stand in for it. Random features are strongly correlated, so this
 * costs a fraction of rounding every weight for itself.
 */
import type { Tensor } from '@stillwell/protocol';
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';

/** Share of the mean variance added before inverting: a weight that costs nothing must not swing without bound. */
const STEADY = 1e-4;
/** Room above a row's largest weight, since weights grow as they make good for others. */
const HEADROOM = 1.1;
const LARGEST = 127;

/** Prepared moments: U upper with H⁻¹ = U'U, so that row j of U says how later weights make good for weight j. */
export interface RoundingPlan {
  readonly count: number;
  readonly upper: Float64Array;
}

/**
 * Prepares.
 *
 * shapes  gram (D × D) about the means
 * units   standardised
 * throws  TrainError 'fit' if the moments are not positive definite
 * source  Hassibi and Stork, Optimal Brain Surgeon (1993); in this order of weights Frantar et al. (2022)
 * cost    O(D³)
 */
export function planRounding(gram: Float64Array, D: number): RoundingPlan {
  const steady = gram.slice();
  let trace = 0;
  for (let j = 0; j < D; j++) trace += gram[j * D + j];
  for (let j = 0; j < D; j++) steady[j * D + j] += (STEADY * trace) / D || 1;
  const inverse = new Float64Array(D * D);
  for (let j = 0; j < D; j++) inverse[j * D + j] = 1;
  solveCholesky(cholesky(steady, D), D, inverse, D);
  const lower = cholesky(inverse, D);
  const upper = new Float64Array(D * D);
  for (let i = 0; i < D; i++) for (let j = 0; j <= i; j++) upper[j * D + i] = lower[i * D + j];
  return { count: D, upper };
}

/**
 * Rounds.
 *
 * shapes  rows (k × D)
 * units   as the rows
 * throws  nothing
 * source  as planRounding
 * cost    O(k D²)
 */
export function roundRows(rows: Float64Array, k: number, { count: D, upper }: RoundingPlan): Tensor {
  const data = new Int8Array(k * D);
  const scales = new DataView(new ArrayBuffer(4 * k));
  for (let row = 0; row < k; row++) {
    const left = rows.slice(row * D, (row + 1) * D);
    const most = left.reduce((size, value) => Math.max(size, Math.abs(value)), 0);
    const scale = Math.fround((HEADROOM * most) / LARGEST);
    scales.setFloat32(4 * row, scale, true);
    if (scale === 0) continue;
    for (let j = 0; j < D; j++) {
      const whole = Math.max(-LARGEST, Math.min(LARGEST, Math.round(left[j] / scale)));
      data[row * D + j] = whole;
      const error = (left[j] - whole * scale) / upper[j * D + j];
      for (let l = j + 1; l < D; l++) left[l] -= error * upper[j * D + l];
    }
  }
  return { type: 'i8', rows: k, cols: D, scales: new Uint8Array(scales.buffer), data: new Uint8Array(data.buffer) };
}
