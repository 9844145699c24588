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
  if (cols === 4) {
    multiplyFour(matrix, rows, vector, vectorAt, out, outAt);
    return;
  }
  const whole = cols - (cols % 4);
  let row = 0;
  // Two rows at a time, so that each number of the vector is read once for both; every sum stays in its own order.
  for (; row + 1 < rows; row += 2) {
    const a = row * cols;
    const b = a + cols;
    let a0 = 0;
    let a1 = 0;
    let a2 = 0;
    let a3 = 0;
    let b0 = 0;
    let b1 = 0;
    let b2 = 0;
    let b3 = 0;
    for (let j = 0; j < whole; j += 4) {
      const v0 = vector[vectorAt + j];
      const v1 = vector[vectorAt + j + 1];
      const v2 = vector[vectorAt + j + 2];
      const v3 = vector[vectorAt + j + 3];
      a0 += matrix[a + j] * v0;
      a1 += matrix[a + j + 1] * v1;
      a2 += matrix[a + j + 2] * v2;
      a3 += matrix[a + j + 3] * v3;
      b0 += matrix[b + j] * v0;
      b1 += matrix[b + j + 1] * v1;
      b2 += matrix[b + j + 2] * v2;
      b3 += matrix[b + j + 3] * v3;
    }
    if (whole < cols) {
      a0 += matrix[a + whole] * vector[vectorAt + whole];
      b0 += matrix[b + whole] * vector[vectorAt + whole];
    }
    if (whole + 1 < cols) {
      a1 += matrix[a + whole + 1] * vector[vectorAt + whole + 1];
      b1 += matrix[b + whole + 1] * vector[vectorAt + whole + 1];
    }
    if (whole + 2 < cols) {
      a2 += matrix[a + whole + 2] * vector[vectorAt + whole + 2];
      b2 += matrix[b + whole + 2] * vector[vectorAt + whole + 2];
    }
    out[outAt + row] = a0 + a1 + (a2 + a3);
    out[outAt + row + 1] = b0 + b1 + (b2 + b3);
  }
  if (row < rows) multiplyRow(matrix, row * cols, cols, vector, vectorAt, out, outAt + row);
}

/** Four columns, as a path's few curves often are: the vector is read once. The zero is what the sums begin with. */
function multiplyFour(
  matrix: Float64Array,
  rows: number,
  vector: Float64Array,
  vectorAt: number,
  out: Float64Array,
  outAt: number,
): void {
  const v0 = vector[vectorAt];
  const v1 = vector[vectorAt + 1];
  const v2 = vector[vectorAt + 2];
  const v3 = vector[vectorAt + 3];
  for (let row = 0, a = 0; row < rows; row++, a += 4) {
    out[outAt + row] = 0 + (matrix[a] * v0 + matrix[a + 1] * v1 + (matrix[a + 2] * v2 + matrix[a + 3] * v3));
  }
}

/** The last row of an odd number. */
function multiplyRow(
  matrix: Float64Array,
  at: number,
  cols: number,
  vector: Float64Array,
  vectorAt: number,
  out: Float64Array,
  to: number,
): void {
  const whole = cols - (cols % 4);
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
  out[to] = s0 + s1 + (s2 + s3);
}
