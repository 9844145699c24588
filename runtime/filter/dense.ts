/**
 * The one dense kernel of the filter, row-major float64. Summation order is part of the arithmetic version: four partial
 * sums over the indices 0, 1, 2, 3 modulo 4, each in ascending order, then (s0 + s1) + (s2 + s3). Four, because a single
 * running sum waits for each addition; the order is fixed, because floating addition is not associative and two machines
 * must agree to the bit. Results go to a buffer and never through a return value, since a float64 that crosses a call
 * which is not inlined is put on the heap. Not for large matrices: no blocking, rows are walked once.
 */

/**
 * out[outAt + i] = row i of matrix × vector, in the order stated above.
 *
 * shapes  matrix (rows × cols), vector (cols numbers from vectorAt), out (rows numbers from outAt); not checked here
 * cost    O(rows · cols); allocates nothing
 */
export function multiply(
  matrix: Float64Array,
  rows: number,
  cols: number,
  vector: Float64Array,
  vectorAt: number,
  out: Float64Array,
  outAt: number,
): void {
  const whole = cols - (cols % 4);
  for (let row = 0; row < rows; row++) {
    const at = row * cols;
    let s0 = 0;
    let s1 = 0;
    let s2 = 0;
    let s3 = 0;
    for (let j = 0; j < whole; j += 4) {
      s0 += matrix[at + j] * vector[vectorAt + j];
      s1 += matrix[at + j + 1] * vector[vectorAt + j + 1];
      s2 += matrix[at + j + 2] * vector[vectorAt + j + 2];
      s3 += matrix[at + j + 3] * vector[vectorAt + j + 3];
    }
    if (whole < cols) s0 += matrix[at + whole] * vector[vectorAt + whole];
    if (whole + 1 < cols) s1 += matrix[at + whole + 1] * vector[vectorAt + whole + 1];
    if (whole + 2 < cols) s2 += matrix[at + whole + 2] * vector[vectorAt + whole + 2];
    out[outAt + row] = s0 + s1 + (s2 + s3);
  }
}
