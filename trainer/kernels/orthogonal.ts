/**
 * Orthonormal columns of a tall block. Cholesky of the Gram matrix, twice, is products alone and as orthogonal as
 * Householder's reflections while the condition number stays below about 10^7 (Yamamoto et al. 2015, "Roundoff error
 * analysis of the CholeskyQR2 algorithm"); a block beyond that goes by reflections, which hold for any block.
 */
import type { Arena } from './arena.ts';
import type { Core, Pointer } from './core.ts';
import { addProduct, mirrorLower } from './products.ts';
import { factorByReflections } from './reflections.ts';
import { factorLower, rightSolve } from './triangular.ts';

/** Smallest pivot of the equilibrated Gram matrix that Cholesky is trusted with: (1e-6)². */
const LEAST_PIVOT = 1e-12;

/** So far from orthonormal a second pass brings any columns to rounding. */
const NEAR = 1e-3;

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
 * throws  RangeError where a value is not finite; a column that depends on earlier ones gets a zero on R's diagonal, to
 *         rounding, and a column of Q that is orthonormal all the same
 * source  Yamamoto, Nakatsukasa, Yanagisawa & Fukaya, ETNA 44 (2015); Golub & Van Loan (2013), section 5.2.2
 * cost    2 rows columns² multiplications; by reflections as many at a fifth of the speed
 */
export function factorTall(work: Workspace, a: Float64Array, r: Float64Array, rows: number, columns: number): void {
  const { core, arena, scratch, turned } = work;
  const mark = arena.mark();
  const again = new Float64Array(arena.buffer, arena.takeRaw(8 * columns * columns), columns * columns);
  if (!cholesky(work, a, r, rows, columns, false)) {
    factorByReflections(core, arena, a, r, rows, columns);
    arena.release(mark);
    return;
  }
  rightSolve(core, scratch, turned, r.byteOffset, a.byteOffset, columns, rows);
  // A = Q1 R1 holds however far Q1 is from orthonormal; only if it is near may products finish it.
  if (cholesky(work, a, again, rows, columns, true)) {
    rightSolve(core, scratch, turned, again.byteOffset, a.byteOffset, columns, rows);
  } else {
    factorByReflections(core, arena, a, again, rows, columns);
  }
  multiplyUpper(again, r, columns);
  arena.release(mark);
}

/** R of A'A = R'R where the columns are far enough from dependent; `isNear` asks for columns near orthonormal. */
function cholesky(
  work: Workspace,
  a: Float64Array,
  r: Float64Array,
  rows: number,
  columns: number,
  isNear: boolean,
): boolean {
  const { core, arena, scratch, turned } = work;
  r.fill(0);
  const at = a.byteOffset;
  const factor = { at, rowStride: 1, stepStride: columns, isSingle: false };
  addProduct(core, scratch, r.byteOffset, columns, factor, factor, columns, columns, rows, { isLower: true });
  mirrorLower(r, columns);
  const norms = Float64Array.from({ length: columns }, (_, j) => r[j * columns + j]);
  if (!norms.every((norm) => norm > 1e-280 && norm < 1e280)) return false;
  if (isNear && departure(r, columns) > NEAR) return false;
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

/** Largest entry of R - I. */
function departure(r: Float64Array, n: number): number {
  let worst = 0;
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < n; j++) worst = Math.max(worst, Math.abs(r[i * n + j] - (i === j ? 1 : 0)));
  }
  return worst;
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
