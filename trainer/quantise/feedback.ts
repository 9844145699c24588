/**
 * Rounding a row of weights so that what one column loses, the columns after it make up for as far as features are alike:
 * the error that matters is the forecast's, not the weight's. Neighbouring means and resonators are nearly copies of each
 * other, and a map that leans on their differences loses far more by rounding each weight for itself.
 */
import type { Tensor } from '@stillwell/protocol';
import { cholesky, solveLower } from '../linalg/cholesky.ts';

/** Largest integer of an int8 row. */
const LARGEST = 127;
/** Share of each variance added: alike features are not leaned on beyond what their covariance is known to. */
const RIDGE = 1e-4;
/** Where a made-up weight leaves the integers the row's scale is raised by this, so often at most; then it is cut. */
const RAISE = 1.15;
const MOST_RAISES = 8;

/**
 * How each feature is best replaced by those after it: x_j ≈ -Σ_{k>j} v_jk x_k.
 *
 * shapes  covariance (n × n); result (n × n) unit upper triangular
 * units   any
 * throws  TrainError 'fit' if the covariance is not positive definite
 * source  regression on the following variables by a triangular factor, taken from the last backwards: Golub & Van Loan,
 *         Matrix Computations, 4th ed. (2013), section 4.2
 * cost    O(n³)
 */
export function replacements(covariance: Float64Array, n: number): Float64Array {
  const reversed = new Float64Array(n * n);
  let largest = 0;
  for (let a = 0; a < n; a++) largest = Math.max(largest, covariance[a * n + a]);
  for (let a = 0; a < n; a++) {
    for (let b = 0; b < n; b++) reversed[a * n + b] = covariance[(n - 1 - a) * n + (n - 1 - b)];
    reversed[a * n + a] += RIDGE * Math.max(reversed[a * n + a], RIDGE * largest) || 1;
  }
  const inverse = new Float64Array(n * n);
  for (let a = 0; a < n; a++) inverse[a * n + a] = 1;
  solveLower(cholesky(reversed, n), n, inverse, n);
  const out = new Float64Array(n * n);
  for (let j = 0; j < n; j++) {
    const row = (n - 1 - j) * n;
    const unit = inverse[row + n - 1 - j];
    for (let k = j; k < n; k++) out[j * n + k] = inverse[row + n - 1 - k] / unit;
  }
  return out;
}

/**
 * An int8 tensor of rows rounded one column after the other.
 *
 * shapes  values (rows × cols), replacedIn(row) (cols × cols) from `replacements`
 * units   as the values
 * throws  nothing
 * source  Hassibi & Stork, Advances in Neural Information Processing Systems 5 (1993), equation 5, with rounding in place of
 *         removal and a fixed order
 * cost    O(rows cols²)
 */
export function roundRows(
  values: Float64Array,
  rows: number,
  cols: number,
  replacedIn: (row: number) => Float64Array,
): Tensor {
  const data = new Int8Array(rows * cols);
  const scales = new Uint8Array(4 * rows);
  const view = new DataView(scales.buffer);
  for (let r = 0; r < rows; r++) {
    const row = values.subarray(r * cols, (r + 1) * cols);
    const replaced = replacedIn(r);
    let largest = 0;
    for (const value of row) largest = Math.max(largest, Math.abs(value));
    let scale = Math.fround(largest / LARGEST);
    const into = data.subarray(r * cols, (r + 1) * cols);
    for (let raise = 0; scale > 0 && !roundRow(row, scale, replaced, into) && raise < MOST_RAISES; raise++) {
      scale = Math.fround(scale * RAISE);
    }
    view.setFloat32(4 * r, scale, true);
  }
  return Object.freeze({ type: 'i8', rows, cols, scales, data: new Uint8Array(data.buffer) });
}

/** Whether all integers stayed within bounds; those that did not are cut. */
function roundRow(row: Float64Array, scale: number, replaced: Float64Array, out: Int8Array): boolean {
  const n = row.length;
  const left = row.slice();
  let isWithin = true;
  for (let j = 0; j < n; j++) {
    const whole = Math.round(left[j] / scale);
    const kept = Math.max(-LARGEST, Math.min(LARGEST, whole));
    if (kept !== whole) isWithin = false;
    out[j] = kept;
    const lost = left[j] - kept * scale;
    for (let k = j + 1; k < n; k++) left[k] -= lost * replaced[j * n + k];
  }
  return isWithin;
}
