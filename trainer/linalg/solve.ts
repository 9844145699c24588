/** General linear equations, guarded: the library beneath answers finite and wrong when an entry is not finite. */
import { LuDecomposition, Matrix } from 'ml-matrix';

/**
 * Solves A X = B; null where A is singular or the answer is not finite.
 *
 * shapes  a (n × n), b (n × m), result (n × m); row-major
 * units   any
 * throws  nothing
 * source  Gaussian elimination with row exchanges as in ml-matrix; Golub & Van Loan (2013), section 3.4
 * cost    n³/3 + n² m multiplications
 */
export function solveGeneral(a: Float64Array, b: Float64Array, n: number, m: number): Float64Array | null {
  if (!a.every(Number.isFinite) || !b.every(Number.isFinite)) return null;
  const factor = new LuDecomposition(toMatrix(a, n, n));
  if (factor.isSingular()) return null;
  const solved = Float64Array.from(factor.solve(toMatrix(b, n, m)).to1DArray());
  return solved.every(Number.isFinite) ? solved : null;
}

/**
 * A matrix of the library.
 *
 * shapes  values (rows × cols); row-major
 * units   any
 * throws  nothing
 * source  none
 * cost    copies
 */
export function toMatrix(values: Float64Array, rows: number, cols: number): Matrix {
  const out = new Matrix(rows, cols);
  for (let i = 0; i < rows; i++) for (let j = 0; j < cols; j++) out.set(i, j, values[i * cols + j]);
  return out;
}
