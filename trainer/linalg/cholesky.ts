/**
 * Cholesky factor and solves for the ridge equations. Preferred to an eigendecomposition, which costs thirty times as
 * much at the sizes met here; a ridge keeps the matrix well inside the positive definite ones. Not for indefinite or
 * rank-deficient matrices: those are refused, never patched.
 */
import { TrainError } from '../errors.ts';

/**
 * Lower factor L of a symmetric positive definite matrix, A = L L'.
 *
 * shapes  a (n × n), only its lower triangle is read; result (n × n), upper triangle zero
 * units   any
 * throws  TrainError 'fit' if a pivot is not positive or not finite, naming the row
 * source  Golub & Van Loan, Matrix Computations, 4th ed. (2013), algorithm 4.2.1 (row-wise variant)
 * cost    n³/6 multiplications
 */
export function cholesky(a: Float64Array, n: number): Float64Array {
  const l = new Float64Array(n * n);
  for (let i = 0; i < n; i++) {
    for (let j = 0; j <= i; j++) {
      const rest = a[i * n + j] - dot(l, i * n, j * n, j);
      if (i !== j) {
        l[i * n + j] = rest / l[j * n + j];
        continue;
      }
      if (!(rest > 0 && rest < Number.POSITIVE_INFINITY)) throw notPositive(i, rest);
      l[i * n + i] = Math.sqrt(rest);
    }
  }
  return l;
}

/**
 * Solves L L' X = B in place.
 *
 * shapes  l (n × n) from `cholesky`; b (n × m), overwritten with X
 * units   any
 * throws  nothing
 * source  Golub & Van Loan (2013), section 3.1 (row-oriented substitution, all right-hand sides at once)
 * cost    n² m multiplications
 */
export function solveCholesky(l: Float64Array, n: number, b: Float64Array, m: number): void {
  solveLower(l, n, b, m);
  solveLowerTransposed(l, n, b, m);
}

/**
 * Solves L X = B in place.
 *
 * shapes  l (n × n) lower triangular; b (n × m), overwritten with X
 * units   any
 * throws  nothing
 * source  Golub & Van Loan (2013), section 3.1
 * cost    n² m / 2 multiplications
 */
export function solveLower(l: Float64Array, n: number, b: Float64Array, m: number): void {
  for (let i = 0; i < n; i++) {
    const row = b.subarray(i * m, i * m + m);
    let k = 0;
    for (; k + 3 < i; k += 4) takeFour(row, b, k * m, m, l, i * n + k, 1);
    for (; k < i; k++) takeOne(row, b, k * m, m, l[i * n + k]);
    const pivot = l[i * n + i];
    for (let j = 0; j < m; j++) row[j] = row[j] / pivot;
  }
}

/**
 * Solves L' X = B in place.
 *
 * shapes  l (n × n) lower triangular; b (n × m), overwritten with X
 * units   any
 * throws  nothing
 * source  Golub & Van Loan (2013), section 3.1
 * cost    n² m / 2 multiplications
 */
export function solveLowerTransposed(l: Float64Array, n: number, b: Float64Array, m: number): void {
  for (let i = n - 1; i >= 0; i--) {
    const row = b.subarray(i * m, i * m + m);
    let k = i + 1;
    for (; k + 3 < n; k += 4) takeFour(row, b, k * m, m, l, k * n + i, n);
    for (; k < n; k++) takeOne(row, b, k * m, m, l[k * n + i]);
    const pivot = l[i * n + i];
    for (let j = 0; j < m; j++) row[j] = row[j] / pivot;
  }
}

function dot(l: Float64Array, a: number, b: number, n: number): number {
  let s0 = 0;
  let s1 = 0;
  let s2 = 0;
  let s3 = 0;
  let k = 0;
  for (; k + 3 < n; k += 4) {
    s0 += l[a + k] * l[b + k];
    s1 += l[a + k + 1] * l[b + k + 1];
    s2 += l[a + k + 2] * l[b + k + 2];
    s3 += l[a + k + 3] * l[b + k + 3];
  }
  for (; k < n; k++) s0 += l[a + k] * l[b + k];
  return s0 + s1 + (s2 + s3);
}

function takeFour(
  row: Float64Array,
  b: Float64Array,
  from: number,
  m: number,
  l: Float64Array,
  at: number,
  stride: number,
): void {
  const f0 = l[at];
  const f1 = l[at + stride];
  const f2 = l[at + 2 * stride];
  const f3 = l[at + 3 * stride];
  const r1 = from + m;
  const r2 = r1 + m;
  const r3 = r2 + m;
  for (let j = 0; j < m; j++) {
    row[j] = row[j] - (f0 * b[from + j] + f1 * b[r1 + j] + f2 * b[r2 + j] + f3 * b[r3 + j]);
  }
}

function takeOne(row: Float64Array, b: Float64Array, from: number, m: number, f: number): void {
  for (let j = 0; j < m; j++) row[j] = row[j] - f * b[from + j];
}

function notPositive(row: number, pivot: number): TrainError {
  return new TrainError(
    'fit',
    `The moments of the features are not positive definite: pivot ${pivot} at row ${row}, expected a positive number. ` +
      'A larger ridge penalty or a history without copies of one signal mends it.',
    { details: { row, pivot } },
  );
}
