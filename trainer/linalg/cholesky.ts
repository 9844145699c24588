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
  const pair = new Float64Array(2);
  for (let i = 0; i < n; i += 2) {
    const hasNext = i + 1 < n;
    for (let j = 0; j < i; j++) {
      if (hasNext) twoDots(l, i * n, n, j * n, j, pair);
      else pair[0] = dot(l, i * n, j * n, j);
      l[i * n + j] = (a[i * n + j] - pair[0]) / l[j * n + j];
      if (hasNext) l[(i + 1) * n + j] = (a[(i + 1) * n + j] - pair[1]) / l[j * n + j];
    }
    setPivot(l, a, n, i);
    if (!hasNext) continue;
    l[(i + 1) * n + i] = (a[(i + 1) * n + i] - dot(l, (i + 1) * n, i * n, i)) / l[i * n + i];
    setPivot(l, a, n, i + 1);
  }
  return l;
}

function setPivot(l: Float64Array, a: Float64Array, n: number, i: number): void {
  const rest = a[i * n + i] - dot(l, i * n, i * n, i);
  if (!(rest > 0 && rest < Number.POSITIVE_INFINITY)) throw notPositive(i, rest);
  l[i * n + i] = Math.sqrt(rest);
}

/** Products of the rows at a and at a + n with the row at b, each in the order of `dot`. */
function twoDots(l: Float64Array, a: number, n: number, b: number, count: number, out: Float64Array): void {
  let s0 = 0;
  let s1 = 0;
  let s2 = 0;
  let s3 = 0;
  let r0 = 0;
  let r1 = 0;
  let r2 = 0;
  let r3 = 0;
  const next = a + n;
  let k = 0;
  for (; k + 3 < count; k += 4) {
    const b0 = l[b + k];
    const b1 = l[b + k + 1];
    const b2 = l[b + k + 2];
    const b3 = l[b + k + 3];
    s0 += l[a + k] * b0;
    s1 += l[a + k + 1] * b1;
    s2 += l[a + k + 2] * b2;
    s3 += l[a + k + 3] * b3;
    r0 += l[next + k] * b0;
    r1 += l[next + k + 1] * b1;
    r2 += l[next + k + 2] * b2;
    r3 += l[next + k + 3] * b3;
  }
  for (; k < count; k++) {
    s0 += l[a + k] * l[b + k];
    r0 += l[next + k] * l[b + k];
  }
  out[0] = s0 + s1 + (s2 + s3);
  out[1] = r0 + r1 + (r2 + r3);
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
