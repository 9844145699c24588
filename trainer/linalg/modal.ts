/**
 * A general recursion x⁺ = A x + B u taken apart into modes. Recursions whose poles coincide have no such form: their modes
 * would cancel each other in ever larger numbers.
 */
import { EigenvalueDecomposition, Matrix } from 'ml-matrix';
import type { Modes } from './modes.ts';
import { solveGeneral, toMatrix } from './solve.ts';

/** A recursion by its modes: complex pairs first, in falling order of their modulus, then real ones likewise. */
export interface ModalRecursion {
  readonly modes: Modes;
  /** (size × m) what the m inputs add. */
  readonly drive: Float64Array;
}

/** Modes of unit length that take more than this many times the drive only to cancel each other are no form to compute in. */
const MOST_CANCELLING = 1e7;

/**
 * The modal form of a recursion; null where there is none, or an entry is not finite.
 *
 * shapes  a (n × n), b (n × m)
 * units   any; a mode's scale is arbitrary
 * throws  nothing
 * source  eigenvectors by Hessenberg form and QR steps as in ml-matrix (JAMA's orthes, hqr2)
 * cost    about 25 n³ operations
 */
export function modalForm(a: Float64Array, b: Float64Array, n: number, m: number): ModalRecursion | null {
  // The library loops for ever on what is not finite.
  if (!a.every(Number.isFinite)) return null;
  const found = new EigenvalueDecomposition(toMatrix(a, n, n), { assumeSymmetric: false });
  const { realEigenvalues: re, imaginaryEigenvalues: im } = found;
  const order = polesInOrder(re, im);
  const vectors = new Matrix(n, n);
  const modes = emptyModes(n, order.length);
  let at = 0;
  order.forEach((from, k) => {
    const isComplex = im[from] > 0;
    modes.first[k] = at;
    modes.isComplex[k] = isComplex ? 1 : 0;
    modes.re[k] = re[from];
    // Columns v, w with A (v + iw) = λ (v + iw) make a state that turns backwards.
    modes.im[k] = isComplex ? -im[from] : 0;
    at += putColumns(found.eigenvectorMatrix, from, isComplex, vectors, at);
  });
  const drive = solveGeneral(Float64Array.from(vectors.to1DArray()), b, n, m);
  const largest = (values: Float64Array): number => values.reduce((most, value) => Math.max(most, Math.abs(value)), 0);
  return drive !== null && largest(drive) <= MOST_CANCELLING * largest(b) ? { modes, drive } : null;
}

/** Index of each real pole and of the first of each pair. */
function polesInOrder(re: readonly number[], im: readonly number[]): number[] {
  const modulus = (k: number): number => Math.hypot(re[k], im[k]);
  const all = Array.from(re, (_, k) => k).filter((k) => im[k] >= 0);
  const rank = (k: number): number => (im[k] > 0 ? 0 : 1);
  return all.sort((j, k) => rank(j) - rank(k) || modulus(k) - modulus(j) || j - k);
}

function emptyModes(size: number, count: number): Modes {
  return {
    size,
    first: new Int32Array(count),
    isComplex: new Uint8Array(count),
    re: new Float64Array(count),
    im: new Float64Array(count),
  };
}

/** Copies one or two columns, made of unit length (pairs together); gives their number. */
function putColumns(from: Matrix, column: number, isComplex: boolean, to: Matrix, at: number): number {
  const count = isComplex ? 2 : 1;
  let square = 0;
  for (let i = 0; i < to.rows; i++) for (let j = 0; j < count; j++) square += from.get(i, column + j) ** 2;
  const unit = Math.sqrt(count / square);
  for (let i = 0; i < to.rows; i++) for (let j = 0; j < count; j++) to.set(i, at + j, unit * from.get(i, column + j));
  return count;
}
