/**
 * Orthonormal columns of a tall block. Cholesky of the Gram matrix, twice, is products alone and as orthogonal as
 * Householder's reflections while the condition number stays below about 10^7 (Yamamoto et al. 2015, "Roundoff error
 * analysis of the CholeskyQR2 algorithm"); a block beyond that goes by reflections, which hold for any block.
 */
import type { Arena } from './arena.ts';
import type { Core, Pointer } from './core.ts';
import { addProduct, mirrorLower } from './products.ts';
import { factorLower, rightSolve } from './triangular.ts';

/** Smallest pivot of the equilibrated Gram matrix that Cholesky is trusted with: (1e-6)². */
const LEAST_PIVOT = 1e-12;

/** What the steps share. */
export interface Workspace {
  readonly core: Core;
  readonly arena: Arena;
  readonly scratch: Pointer;
  readonly turned: Pointer;
}

/**
 * A = Q R with a diagonal of R that is not negative; A is overwritten with Q.
 *
 * shapes  a (rows × columns), rows >= columns; r (columns × columns) upper triangular
 * units   r as a
 * throws  RangeError where a value is not finite; columns that depend on earlier ones get a zero on R's diagonal, to rounding, and an orthonormal column
 * source  Yamamoto, Nakatsukasa, Yanagisawa & Fukaya, ETNA 44 (2015); Golub & Van Loan (2013), section 5.2.2
 * cost    2 rows columns² multiplications; Householder's way twice that, without blocks
 */
export function factorTall(work: Workspace, a: Float64Array, r: Float64Array, rows: number, columns: number): void {
  const mark = work.arena.mark();
  const copy = new Float64Array(work.arena.buffer, work.arena.takeRaw(8 * columns * columns), columns * columns);
  const first = cholesky(work, a, r, rows, columns);
  if (first) {
    rightSolve(work.core, work.scratch, work.turned, r.byteOffset, a.byteOffset, columns, rows);
    if (!cholesky(work, a, copy, rows, columns))
      throw new RangeError('A factor of a well-conditioned block is singular.');
    rightSolve(work.core, work.scratch, work.turned, copy.byteOffset, a.byteOffset, columns, rows);
    multiplyUpper(copy, r, columns);
  } else {
    r.fill(0);
    reflect(a, r, rows, columns);
  }
  work.arena.release(mark);
}

/** R of A'A = R'R where the columns are far enough from dependent. */
function cholesky(work: Workspace, a: Float64Array, r: Float64Array, rows: number, columns: number): boolean {
  const { core, arena, scratch, turned } = work;
  r.fill(0);
  const at = a.byteOffset;
  const factor = { at, rowStride: 1, stepStride: columns, isSingle: false };
  addProduct(core, scratch, r.byteOffset, columns, factor, factor, columns, columns, rows, { isLower: true });
  mirrorLower(r, columns);
  const norms = Float64Array.from({ length: columns }, (_, j) => r[j * columns + j]);
  if (!norms.every((norm) => norm > 1e-280 && norm < 1e280)) return false;
  if (factorLower(core, arena.buffer, scratch, turned, r.byteOffset, columns) >= 0) return false;
  for (let i = 0; i < columns; i++) {
    if (r[i * columns + i] ** 2 < LEAST_PIVOT * norms[i]) return false;
    for (let j = 0; j < i; j++) {
      r[j * columns + i] = r[i * columns + j];
      r[i * columns + j] = 0;
    }
  }
  return true;
}

/** r = s r for upper triangular factors. */
function multiplyUpper(s: Float64Array, r: Float64Array, n: number): void {
  for (let i = 0; i < n; i++) {
    for (let j = i; j < n; j++) {
      let sum = 0;
      for (let k = i; k <= j; k++) sum += s[i * n + k] * r[k * n + j];
      r[i * n + j] = sum;
    }
  }
}

/** Householder reflections, the vectors kept below the diagonal of A until Q is formed from them. */
function reflect(a: Float64Array, r: Float64Array, rows: number, n: number): void {
  const scales = new Float64Array(n);
  const row = new Float64Array(n);
  for (let k = 0; k < n; k++) {
    const norm = columnNorm(a, rows, n, k);
    const head = a[k * n + k];
    const diagonal = head > 0 ? -norm : norm;
    if (norm > 0) {
      const pivot = head - diagonal;
      scales[k] = -pivot / diagonal;
      for (let i = k + 1; i < rows; i++) a[i * n + k] /= pivot;
    }
    applyReflection(a, row, rows, n, k, scales[k]);
    a[k * n + k] = diagonal;
  }
  for (let i = 0; i < n; i++) for (let j = i; j < n; j++) r[i * n + j] = a[i * n + j];
  formColumns(a, row, scales, rows, n);
  for (let i = 0; i < n; i++) {
    if (!(r[i * n + i] < 0)) continue;
    for (let j = i; j < n; j++) r[i * n + j] = -r[i * n + j];
    for (let l = 0; l < rows; l++) a[l * n + i] = -a[l * n + i];
  }
}

/** Length of column k from row k down, scaled so that squares neither overflow nor vanish. */
function columnNorm(a: Float64Array, rows: number, n: number, k: number): number {
  let largest = 0;
  for (let i = k; i < rows; i++) largest = Math.max(largest, Math.abs(a[i * n + k]));
  if (largest === 0) return 0;
  if (!(largest < Number.POSITIVE_INFINITY)) throw new RangeError(`Column ${k} of the block is not finite.`);
  let sum = 0;
  for (let i = k; i < rows; i++) sum += (a[i * n + k] / largest) ** 2;
  return largest * Math.sqrt(sum);
}

/** Applies reflection k, whose vector is 1 at row k and column k of A below, to the columns right of k. */
function applyReflection(a: Float64Array, row: Float64Array, rows: number, n: number, k: number, scale: number): void {
  if (scale === 0) return;
  for (let j = k + 1; j < n; j++) row[j] = a[k * n + j];
  for (let i = k + 1; i < rows; i++) {
    const v = a[i * n + k];
    for (let j = k + 1; j < n; j++) row[j] += v * a[i * n + j];
  }
  for (let j = k + 1; j < n; j++) {
    row[j] *= scale;
    a[k * n + j] -= row[j];
  }
  for (let i = k + 1; i < rows; i++) {
    const v = a[i * n + k];
    for (let j = k + 1; j < n; j++) a[i * n + j] -= v * row[j];
  }
}

/** Q from the reflections, the last first (Golub & Van Loan 2013, section 5.1.6, backward accumulation). */
function formColumns(a: Float64Array, row: Float64Array, scales: Float64Array, rows: number, n: number): void {
  for (let k = n - 1; k >= 0; k--) {
    for (let j = k + 1; j < n; j++) a[k * n + j] = 0;
    applyReflection(a, row, rows, n, k, scales[k]);
    for (let i = k + 1; i < rows; i++) a[i * n + k] *= -scales[k];
    a[k * n + k] = 1 - scales[k];
  }
}
