/**
 * The two dense kernels of the filter, row-major float64. Summation order is part of the arithmetic version: four partial
 * sums over the indices 0, 1, 2, 3 modulo 4, each in ascending order, then (s0 + s1) + (s2 + s3). Four, because a single
 * running sum waits for each addition; the order is fixed, because floating addition is not associative and two machines
 * must agree to the bit. Not for large matrices: no blocking, rows are walked once.
 */

/**
 * Product of two stretches of `count` numbers, `a` from `aAt` and `b` from `bAt`, in the order stated above.
 *
 * shapes  a (≥ aAt + count), b (≥ bAt + count); not checked here, callers are
 * cost    O(count); allocates nothing
 */
export function dot(a: Float64Array, aAt: number, b: Float64Array, bAt: number, count: number): number {
  let s0 = 0;
  let s1 = 0;
  let s2 = 0;
  let s3 = 0;
  const whole = count - (count % 4);
  for (let j = 0; j < whole; j += 4) {
    s0 += a[aAt + j] * b[bAt + j];
    s1 += a[aAt + j + 1] * b[bAt + j + 1];
    s2 += a[aAt + j + 2] * b[bAt + j + 2];
    s3 += a[aAt + j + 3] * b[bAt + j + 3];
  }
  if (whole < count) s0 += a[aAt + whole] * b[bAt + whole];
  if (whole + 1 < count) s1 += a[aAt + whole + 1] * b[bAt + whole + 1];
  if (whole + 2 < count) s2 += a[aAt + whole + 2] * b[bAt + whole + 2];
  return s0 + s1 + (s2 + s3);
}

/**
 * out = matrix × vector, each row by `dot`.
 *
 * shapes  matrix (rows × cols), vector (cols), out (rows)
 * cost    O(rows · cols); allocates nothing
 */
export function multiply(
  matrix: Float64Array,
  rows: number,
  cols: number,
  vector: Float64Array,
  out: Float64Array,
): void {
  for (let row = 0; row < rows; row++) out[row] = dot(matrix, row * cols, vector, 0, cols);
}
