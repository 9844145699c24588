/**
 * Rounding that minds what the numbers are for: weights of correlated states, rounded each by itself, leave errors that add
 * up where the states move together. Here each row is rounded weight by weight, and what one rounding did to the forecast
 * is made good by the weights still to come.
 */
import type { Tensor } from '@stillwell/protocol';
import { cholesky } from '../linalg/cholesky.ts';

/** Share of the state's mean variance added before the covariance is factored. */
const STATE_RIDGE = 1e-9;
const LARGEST = 127;
/** A row's largest weight is put here, so that what is made good finds room beyond it. */
const ROOM = 120;

/**
 * A matrix as int8 with a scale a row, rounded in the norm of the covariance of what it is applied to.
 *
 * shapes  values (rows × cols), covariance (cols × cols)
 * units   any
 * throws  TrainError 'fit' if the covariance is not positive definite, or a value not finite
 * source  nearest plane: Babai, Combinatorica 6 (1986), section 3, with the covariance's Cholesky factor as basis
 * cost    O(cols³/6 + rows cols²)
 */
export function roundInNorm(values: Float64Array, rows: number, cols: number, covariance: Float64Array): Tensor {
  const factor = cholesky(ridged(covariance, cols), cols);
  const data = new Int8Array(rows * cols);
  const scales = new Uint8Array(4 * rows);
  const view = new DataView(scales.buffer);
  for (let row = 0; row < rows; row++) {
    const from = values.subarray(row * cols, (row + 1) * cols);
    const most = from.reduce((largest, value) => Math.max(largest, Math.abs(value)), 0);
    const scale = Math.fround(most / ROOM);
    view.setFloat32(4 * row, scale, true);
    if (scale > 0) roundRow(from, scale, factor, data.subarray(row * cols, (row + 1) * cols));
  }
  return { type: 'i8', rows, cols, scales, data: new Uint8Array(data.buffer) };
}

/** From the last weight to the first: the j-th entry of e L, with e the errors, holds those of weights j and later. */
function roundRow(values: Float64Array, scale: number, factor: Float64Array, out: Int8Array): void {
  const n = values.length;
  const errors = new Float64Array(n);
  for (let j = n - 1; j >= 0; j--) {
    let later = 0;
    for (let k = j + 1; k < n; k++) later += errors[k] * factor[k * n + j];
    const wanted = values[j] + later / factor[j * n + j];
    const whole = Math.max(-LARGEST, Math.min(LARGEST, Math.round(wanted / scale)));
    out[j] = whole;
    errors[j] = values[j] - whole * scale;
  }
}

function ridged(covariance: Float64Array, n: number): Float64Array {
  const out = covariance.slice();
  let trace = 0;
  for (let k = 0; k < n; k++) trace += out[k * n + k];
  for (let k = 0; k < n; k++) out[k * n + k] += (STATE_RIDGE * trace) / n || STATE_RIDGE;
  return out;
}
