/**
 * QR of any tall block by Householder reflections, for those too near dependent for products alone. The first n rows are
 * factored as they are; then rows come a leaf at a time, small enough for the cache, onto the triangle so far. A reflection
 * then meets one row of the triangle and the rows of the leaf, whose columns lie side by side meanwhile; vectors are kept in
 * place of the leaf until the columns of Q are formed from them, the last leaf first.
 */
import type { Arena } from './arena.ts';
import type { Core, Pointer } from './core.ts';

/** Rows of a leaf. */
const LEAF = 256;
/** Squares below it, of numbers scaled to one, are no length to divide by. */
const NO_LENGTH = 1e-280;

interface Reflecting {
  readonly core: Core;
  readonly a: Float64Array;
  readonly r: Float64Array;
  readonly rows: number;
  readonly n: number;
  /** One leaf's vectors, then one leaf's columns of Q; column j at j × LEAF. */
  readonly vectors: Float64Array;
  readonly columns: Float64Array;
  /** Factors of the reflections, leaf after leaf. */
  readonly scales: Float64Array;
}

/**
 * A = Q R with a diagonal of R that is not negative; A is overwritten with Q, which is orthonormal whatever the rank.
 *
 * shapes  a (rows × n), rows >= n; r (n × n), overwritten
 * units   r as a
 * throws  RangeError where a value is not finite or the memory is full (4096 n bytes of scratch)
 * source  Golub & Van Loan (2013), sections 5.1 and 5.2.2; leaves in a row: Demmel, Grigori, Hoemmen & Langou, SIAM J. Sci.
 *         Comput. 34 (2012), section 4
 * cost    4 rows n² operations
 */
export function factorByReflections(
  core: Core,
  arena: Arena,
  a: Float64Array,
  r: Float64Array,
  rows: number,
  n: number,
): void {
  r.fill(0);
  const unit = unitOf(a, rows * n);
  core.scale64(a.byteOffset, 1 / unit, rows * n);
  const mark = arena.mark();
  const scratch = (): Float64Array => new Float64Array(arena.buffer, arena.takeRaw(8 * LEAF * n), LEAF * n);
  const leaves = Math.ceil((rows - n) / LEAF);
  const scales = new Float64Array(leaves * n);
  const work: Reflecting = { core, a, r, rows, n, vectors: scratch(), columns: scratch(), scales };
  const topScales = factorTop(a, r, n);
  for (let leaf = 0; leaf < leaves; leaf++) absorbLeaf(work, leaf);
  const triangle = new Float64Array(n * n);
  for (let i = 0; i < n; i++) {
    const sign = r[i * n + i] < 0 ? -1 : 1;
    triangle[i * n + i] = sign;
    for (let j = i; j < n; j++) r[i * n + j] *= sign * unit;
  }
  for (let leaf = leaves - 1; leaf >= 0; leaf--) formLeaf(work, leaf, triangle);
  formTop(a, triangle, topScales, n);
  arena.release(mark);
}

/** The power of two just above the largest value; one where all are zero. */
function unitOf(a: Float64Array, count: number): number {
  let largest = 0;
  for (let i = 0; i < count; i++) {
    const size = Math.abs(a[i]);
    if (!(size < Number.POSITIVE_INFINITY)) throw new RangeError('A block to factor holds a value that is not finite.');
    if (size > largest) largest = size;
  }
  let unit = 1;
  while (unit < largest && unit < 2 ** 1000) unit *= 2;
  while (unit / 2 > largest && unit > 2 ** -1000 && largest > 0) unit /= 2;
  return unit;
}

/** The reflection that takes `head` and a vector of `squares` onto the head alone: new head, factor, and 1 / divisor of the vector. */
function reflection(head: number, squares: number): { head: number; scale: number; inverse: number } {
  if (squares < NO_LENGTH) return { head, scale: 0, inverse: 0 };
  const norm = Math.sqrt(head * head + squares);
  const next = head > 0 ? -norm : norm;
  return { head: next, scale: (next - head) / next, inverse: 1 / (head - next) };
}

function moveLeaf(work: Reflecting, leaf: number, into: Float64Array, isBack: boolean): number {
  const { a, n, rows } = work;
  const first = n + leaf * LEAF;
  const count = Math.min(LEAF, rows - first);
  for (let i = 0; i < count; i++) {
    const row = (first + i) * n;
    if (isBack) for (let j = 0; j < n; j++) a[row + j] = into[j * LEAF + i];
    else for (let j = 0; j < n; j++) into[j * LEAF + i] = a[row + j];
  }
  return count;
}

function absorbLeaf(work: Reflecting, leaf: number): void {
  const { core, r, n, vectors, scales } = work;
  const at = (j: number): Pointer => vectors.byteOffset + 8 * LEAF * j;
  const count = moveLeaf(work, leaf, vectors, false);
  for (let k = 0; k < n; k++) {
    const { head, scale, inverse } = reflection(r[k * n + k], core.dot64(at(k), at(k), count));
    r[k * n + k] = head;
    scales[leaf * n + k] = scale;
    core.scale64(at(k), inverse, count);
    if (scale === 0) continue;
    for (let j = k + 1; j < n; j++) {
      const w = scale * (r[k * n + j] + core.dot64(at(k), at(j), count));
      r[k * n + j] -= w;
      core.axpy64(at(j), -w, at(k), count);
    }
  }
  moveLeaf(work, leaf, vectors, true);
}

/** Applies a leaf's reflections to the triangle above and zeros in the leaf; the triangle stays one. */
function formLeaf(work: Reflecting, leaf: number, triangle: Float64Array): void {
  const { core, n, vectors, columns, scales } = work;
  const count = moveLeaf(work, leaf, vectors, false);
  columns.fill(0);
  for (let k = n - 1; k >= 0; k--) {
    const scale = scales[leaf * n + k];
    if (scale === 0) continue;
    const v = vectors.byteOffset + 8 * LEAF * k;
    for (let j = k; j < n; j++) {
      const to = columns.byteOffset + 8 * LEAF * j;
      const w = scale * (triangle[k * n + j] + core.dot64(v, to, count));
      triangle[k * n + j] -= w;
      core.axpy64(to, -w, v, count);
    }
  }
  moveLeaf(work, leaf, columns, true);
}

/** The first n rows: vectors below the diagonal, their triangle in r; returns the factors. */
function factorTop(a: Float64Array, r: Float64Array, n: number): Float64Array {
  const scales = new Float64Array(n);
  for (let k = 0; k < n; k++) {
    let squares = 0;
    for (let i = k + 1; i < n; i++) squares += a[i * n + k] * a[i * n + k];
    const { head, scale, inverse } = reflection(a[k * n + k], squares);
    scales[k] = scale;
    for (let i = k + 1; i < n; i++) a[i * n + k] *= inverse;
    applyTop(a, a, n, k, k + 1, scale);
    r[k * n + k] = head;
    for (let j = k + 1; j < n; j++) r[k * n + j] = a[k * n + j];
  }
  return scales;
}

/** Applies reflection k, whose vector is one at row k and column k of `vectors` below, to the columns of `to` from `from` on. */
function applyTop(to: Float64Array, vectors: Float64Array, n: number, k: number, from: number, scale: number): void {
  if (scale === 0) return;
  for (let j = from; j < n; j++) {
    let sum = to[k * n + j];
    for (let i = k + 1; i < n; i++) sum += vectors[i * n + k] * to[i * n + j];
    sum *= scale;
    to[k * n + j] -= sum;
    for (let i = k + 1; i < n; i++) to[i * n + j] -= vectors[i * n + k] * sum;
  }
}

/** The first n rows of Q: the reflections of the top applied to the triangle. */
function formTop(a: Float64Array, triangle: Float64Array, scales: Float64Array, n: number): void {
  for (let k = n - 1; k >= 0; k--) applyTop(triangle, a, n, k, 0, scales[k]);
  a.set(triangle);
}
