/**
 * Cholesky factor and triangular solves, blocked so that nearly all of the work is products (Golub & Van Loan 2013, 4th
 * ed., sections 3.1.3 and 4.2.6).
 */
import type { Core, Pointer } from './core.ts';
import { addProduct, type Factor } from './products.ts';

/** Rows of a block left to the plain loops. */
const BLOCK = 32;
/** Bytes of scratch beside that of a product: a block turned over, and eight right-hand sides. */
export const BLOCK_BYTES = 8 * BLOCK * BLOCK + 64 * BLOCK;
const tileOf = (turned: Pointer): Pointer => turned + 8 * BLOCK * BLOCK;
/** Rows solved from the right at a time, so that they stay in the second cache. */
const RIGHT_ROWS = 256;

const rowsOf = (at: Pointer, stride: number): Factor => ({ at, rowStride: stride, stepStride: 1, isSingle: false });
const columnsOf = (at: Pointer, stride: number): Factor => ({ at, rowStride: 1, stepStride: stride, isSingle: false });

/**
 * Lower factor L of A = L L' in place, the upper triangle zero.
 *
 * shapes  a (n × n) at `a`, only its lower triangle is read; scratch of a product, then BLOCK_BYTES at `turned`
 * units   any
 * throws  nothing; returns -1, or the row whose pivot is not a positive number
 * source  Golub & Van Loan (2013), section 4.2.6, block columns from the left
 * cost    n³/6 multiplications
 */
export function factorLower(
  core: Core,
  buffer: ArrayBuffer,
  scratch: Pointer,
  turned: Pointer,
  a: Pointer,
  n: number,
): number {
  const heap = new Float64Array(buffer, a, n * n);
  const at = (i: number, j: number) => a + 8 * (i * n + j);
  for (let j = 0; j < n; j += BLOCK) {
    const block = Math.min(BLOCK, n - j);
    const rows = n - j;
    if (j > 0) {
      const options = { isLower: true, isTaken: true };
      addProduct(core, scratch, at(j, j), n, rowsOf(at(j, 0), n), rowsOf(at(j, 0), n), rows, block, j, options);
    }
    const bad = core.factorBlock(at(j, j), n, block, turned);
    if (bad >= 0) return j + bad;
    core.rightBlock(turned, block, at(j + block, j), n, block, rows - block, tileOf(turned));
  }
  for (let i = 0; i < n; i++) heap.fill(0, i * n + i + 1, (i + 1) * n);
  return -1;
}

/**
 * Solves L X = B in place.
 *
 * shapes  l (n × n) lower triangular, b (n × m), row-major
 * units   any
 * throws  nothing
 * source  Golub & Van Loan (2013), section 3.1.3
 * cost    n² m / 2 multiplications
 */
export function lowerSolve(
  core: Core,
  scratch: Pointer,
  turned: Pointer,
  l: Pointer,
  b: Pointer,
  n: number,
  m: number,
): void {
  for (let i = 0; i < n; i += BLOCK) {
    const block = Math.min(BLOCK, n - i);
    const to = b + 8 * i * m;
    const options = { isTaken: true };
    if (i > 0) addProduct(core, scratch, to, m, rowsOf(l + 8 * i * n, n), columnsOf(b, m), block, m, i, options);
    core.lowerBlock(l + 8 * (i * n + i), n, to, m, block, m, tileOf(turned));
  }
}

/**
 * Solves L' X = B in place.
 *
 * shapes  l (n × n) lower triangular, b (n × m), row-major
 * units   any
 * throws  nothing
 * source  Golub & Van Loan (2013), section 3.1.3
 * cost    n² m / 2 multiplications
 */
export function upperSolve(
  core: Core,
  scratch: Pointer,
  turned: Pointer,
  l: Pointer,
  b: Pointer,
  n: number,
  m: number,
): void {
  for (let i = Math.floor((n - 1) / BLOCK) * BLOCK; i >= 0; i -= BLOCK) {
    const block = Math.min(BLOCK, n - i);
    const next = i + block;
    const to = b + 8 * i * m;
    if (next < n) {
      const left = columnsOf(l + 8 * (next * n + i), n);
      const right = columnsOf(b + 8 * next * m, m);
      addProduct(core, scratch, to, m, left, right, block, m, n - next, { isTaken: true });
    }
    core.upperBlock(l + 8 * (i * n + i), n, to, m, block, m, tileOf(turned));
  }
}

/**
 * Solves X R = A in place for tall A.
 *
 * shapes  r (n × n) upper triangular, a (rows × n), row-major
 * units   any
 * throws  nothing
 * source  Golub & Van Loan (2013), section 3.1.3
 * cost    rows n² / 2 multiplications
 */
export function rightSolve(
  core: Core,
  scratch: Pointer,
  turned: Pointer,
  r: Pointer,
  a: Pointer,
  n: number,
  rows: number,
): void {
  for (let i = 0; i < rows; i += RIGHT_ROWS) {
    const some = Math.min(RIGHT_ROWS, rows - i);
    const from = a + 8 * i * n;
    for (let j = 0; j < n; j += BLOCK) {
      const block = Math.min(BLOCK, n - j);
      const to = from + 8 * j;
      const options = { isTaken: true };
      if (j > 0) addProduct(core, scratch, to, n, rowsOf(from, n), columnsOf(r + 8 * j, n), some, block, j, options);
      core.rightBlock(r + 8 * (j * n + j), n, to, n, block, some, tileOf(turned));
    }
  }
}
