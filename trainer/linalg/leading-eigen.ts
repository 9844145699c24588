/**
 * The leading eigenvectors of a positive semidefinite matrix whose spectrum falls quickly, by orthogonal iteration: a tenth
 * of the work of a full decomposition where a few dozen of many hundred are wanted. The subspace is made exact for itself by
 * a small decomposition at the end (Rayleigh and Ritz), so vectors are orthonormal and their products with the matrix
 * uncorrelated, however near they are to the true ones. Not for spectra that fall slowly near the count asked for.
 */
import { requireFinite, type SymmetricEigen, symmetricEigen } from './eigen.ts';
import { multiply, transpose } from './products.ts';

/** Vectors carried beyond those asked for: convergence goes with the first eigenvalue left out. */
const SPARE = 16;
const ROUNDS = 8;
/** Below this many times the vectors carried, a full decomposition is as quick. */
const WORTH = 3;
/** A row of which this share is left after projection is rounding alone. */
const VANISHED = 1e-12;

/**
 * The leading eigenvalues and vectors.
 *
 * shapes  a (n × n), symmetric, positive semidefinite; values (k) falling, vectors (n × k) row-major, k = min(n, count);
 *         a vector of a zero eigenvalue may be zero
 * units   any
 * throws  TrainError 'fit' if an entry is not finite
 * source  Golub & Van Loan, Matrix Computations, 4th ed. (2013), sections 8.2.4 and 8.1.4
 * cost    O(n² count) a round, 8 rounds
 */
export function leadingEigen(a: Float64Array, n: number, count: number): SymmetricEigen {
  const carried = count + SPARE;
  if (n < WORTH * carried) return firstOf(symmetricEigen(a, n), n, Math.min(n, count), n);
  requireFinite(a, 'a symmetric matrix');
  const rows = startingRows(carried, n);
  orthonormalise(rows, carried, n);
  for (let round = 0; round < ROUNDS; round++) {
    rows.set(multiply(rows, a, carried, n, n));
    orthonormalise(rows, carried, n);
  }
  const pushed = multiply(rows, a, carried, n, n);
  const columns = transpose(rows, carried, n);
  const small = multiply(pushed, columns, carried, n, carried);
  for (let i = 0; i < carried; i++) {
    for (let j = 0; j < i; j++) {
      small[i * carried + j] = 0.5 * (small[i * carried + j] + small[j * carried + i]);
      small[j * carried + i] = small[i * carried + j];
    }
  }
  const { values, vectors } = symmetricEigen(small, carried);
  return firstOf({ values, vectors: multiply(columns, vectors, n, carried, carried) }, n, count, carried);
}

function firstOf({ values, vectors }: SymmetricEigen, n: number, count: number, width: number): SymmetricEigen {
  const kept = new Float64Array(n * count);
  for (let i = 0; i < n; i++) kept.set(vectors.subarray(i * width, i * width + count), i * count);
  return { values: values.slice(0, count), vectors: kept };
}

/** Numbers in [-1, 1) by a shift-register sequence (Marsaglia, 2003), always the same. */
function startingRows(count: number, n: number): Float64Array {
  let word = 88172645;
  return Float64Array.from({ length: count * n }, () => {
    word ^= word << 13;
    word ^= word >>> 17;
    word ^= word << 5;
    return (word >>> 0) / 2 ** 31 - 1;
  });
}

/** Gram and Schmidt, modified and done twice; a row that lies in the span of those before becomes zero. */
function orthonormalise(rows: Float64Array, count: number, n: number): void {
  for (let k = 0; k < count; k++) {
    const row = rows.subarray(k * n, (k + 1) * n);
    const size = Math.sqrt(dot(row, row));
    for (let pass = 0; pass < 2; pass++) {
      for (let j = 0; j < k; j++) {
        const other = rows.subarray(j * n, (j + 1) * n);
        const share = dot(row, other);
        for (let i = 0; i < n; i++) row[i] -= share * other[i];
      }
      const left = Math.sqrt(dot(row, row));
      const scale = left > VANISHED * size ? 1 / left : 0;
      for (let i = 0; i < n; i++) row[i] *= scale;
      if (scale === 0) break;
    }
  }
}

function dot(a: Float64Array, b: Float64Array): number {
  let s0 = 0;
  let s1 = 0;
  let i = 0;
  for (; i + 1 < a.length; i += 2) {
    s0 += a[i] * b[i];
    s1 += a[i + 1] * b[i + 1];
  }
  return i < a.length ? s0 + s1 + a[i] * b[i] : s0 + s1;
}
