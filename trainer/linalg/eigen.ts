/**
 * Eigenvalues and vectors of symmetric matrices, guarded: the library beneath loops for ever, or answers finite and
 * wrong, when an entry is not finite. Not for general matrices and not for solving equations.
 */
import { EigenvalueDecomposition, Matrix } from 'ml-matrix';
import { TrainError } from '../errors.ts';

/** Eigenvalues in falling order and their vectors. */
export interface SymmetricEigen {
  /** (n) falling. */
  readonly values: Float64Array;
  /** (n × n) row-major, column k belongs to values[k]; the largest entry of each column is positive. */
  readonly vectors: Float64Array;
}

/**
 * Eigendecomposition of a symmetric matrix, A = V diag(values) V'.
 *
 * shapes  a (n × n), symmetric; row-major
 * units   any
 * throws  TrainError 'fit' if an entry is not finite
 * source  Householder tridiagonal form and QL steps as in ml-matrix (JAMA's tred2, tql2); the sign is fixed here so
 *         that the same matrix always gives the same vectors
 * cost    about 9 n³ operations
 */
export function symmetricEigen(a: Float64Array, n: number): SymmetricEigen {
  requireFinite(a, 'a symmetric matrix');
  const rows: number[][] = [];
  for (let i = 0; i < n; i++) rows.push(Array.from(a.subarray(i * n, i * n + n)));
  const found = new EigenvalueDecomposition(new Matrix(rows), { assumeSymmetric: true });
  const order = found.realEigenvalues
    .map((_, k) => k)
    .sort((p, q) => found.realEigenvalues[q] - found.realEigenvalues[p]);
  const values = new Float64Array(n);
  const vectors = new Float64Array(n * n);
  order.forEach((from, k) => {
    values[k] = found.realEigenvalues[from];
    let largest = 0;
    for (let i = 0; i < n; i++) {
      const entry = found.eigenvectorMatrix.get(i, from);
      if (Math.abs(entry) > Math.abs(largest) * (1 + 1e-9)) largest = entry;
      vectors[i * n + k] = entry;
    }
    if (largest < 0) for (let i = 0; i < n; i++) vectors[i * n + k] = -vectors[i * n + k];
  });
  return { values, vectors };
}

/**
 * The symmetric part of a matrix, (A + A')/2: what rounding left of a symmetric one.
 *
 * shapes  a (n × n); result likewise
 * units   any
 * throws  nothing
 * source  definition
 * cost    O(n²)
 */
export function symmetrised(a: Float64Array, n: number): Float64Array {
  const out = new Float64Array(n * n);
  for (let i = 0; i < n; i++) for (let j = 0; j < n; j++) out[i * n + j] = 0.5 * (a[i * n + j] + a[j * n + i]);
  return out;
}

/**
 * Refuses a matrix with an entry that is not a finite number.
 *
 * shapes  a of any length
 * units   any
 * throws  TrainError 'fit' naming the first offending entry
 * source  none
 * cost    one pass
 */
export function requireFinite(a: Float64Array, what: string): void {
  for (let k = 0; k < a.length; k++) {
    if (Number.isFinite(a[k])) continue;
    throw new TrainError('fit', `Entry ${k} of ${what} is ${a[k]}, expected a finite number.`, {
      details: { entry: k },
    });
  }
}
