/** The kernels' interface over one memory: arguments are checked here, work is done in the files beside. */
import type { Arena } from './arena.ts';
import type { Core, Pointer } from './core.ts';
import { FourierPlans } from './fourier.ts';
import type { Kernels, Numbers } from './kernel-functions.ts';
import { factorTall } from './orthogonal.ts';
import { addProduct, type Factor, mirrorLower, PANEL_BYTES } from './products.ts';
import { symmetricBytes, symmetricRows } from './symmetric.ts';
import { BLOCK_BYTES, factorLower, lowerSolve, upperSolve } from './triangular.ts';

/** Bytes of the memory that are the kernels' own. */
export const OWN_BYTES = PANEL_BYTES + BLOCK_BYTES;

type ProductArguments = Parameters<typeof addProduct> extends [unknown, Pointer, ...infer Rest] ? Rest : never;

/** Whichever loops are given, over the memory of the arena. */
export class MemoryKernels implements Kernels {
  readonly isSimd: boolean;
  readonly #core: Core;
  readonly #arena: Arena;
  readonly #plans: FourierPlans;
  readonly #scratch: number;
  readonly #turned: number;

  constructor(isSimd: boolean, core: Core, arena: Arena) {
    this.isSimd = isSimd;
    this.#core = core;
    this.#arena = arena;
    this.#plans = new FourierPlans(core, arena);
    this.#scratch = arena.takeRaw(PANEL_BYTES);
    this.#turned = arena.takeRaw(BLOCK_BYTES);
  }

  alloc64(n: number): Float64Array {
    return new Float64Array(this.#arena.buffer, this.#arena.take(8 * count(n)), n);
  }

  alloc32(n: number): Float32Array {
    return new Float32Array(this.#arena.buffer, this.#arena.take(4 * count(n)), n);
  }

  mark(): number {
    return this.#arena.mark();
  }

  release(mark: number): void {
    this.#arena.release(mark);
  }

  gramAdd(c: Float64Array, a: Numbers, rows: number, columns: number): void {
    const factor = this.#columns(a, rows, columns);
    const options = { isLower: true };
    this.#add(this.#at(c, columns * columns), columns, factor, factor, columns, columns, rows, options);
    mirrorLower(c, columns);
  }

  productAdd(c: Float64Array, a: Numbers, b: Numbers, rows: number, m: number, n: number): void {
    const left = this.#columns(a, rows, m);
    const right = this.#columns(b, rows, n);
    this.#add(this.#at(c, m * n), n, left, right, m, n, rows);
  }

  multiply(c: Float64Array, a: Numbers, b: Numbers, m: number, k: number, n: number): void {
    this.#at(c, m * n);
    c.fill(0, 0, m * n);
    this.#add(c.byteOffset, n, this.#rows(a, m, k), this.#columns(b, k, n), m, n, k);
  }

  multiplyTransposed(c: Float64Array, a: Numbers, b: Numbers, m: number, k: number, n: number): void {
    this.#at(c, m * n);
    c.fill(0, 0, m * n);
    this.#add(c.byteOffset, n, this.#rows(a, m, k), this.#rows(b, n, k), m, n, k);
  }

  multiplyTake(c: Float64Array, a: Numbers, b: Numbers, m: number, k: number, n: number): void {
    const options = { isTaken: true };
    const left = this.#rows(a, m, k);
    this.#add(this.#at(c, m * n), n, left, this.#columns(b, k, n), m, n, k, options);
  }

  cholesky(a: Float64Array, n: number): number {
    return factorLower(this.#core, this.#arena.buffer, this.#scratch, this.#turned, this.#at(a, n * n), n);
  }

  solveLower(l: Float64Array, b: Float64Array, n: number, m: number): void {
    lowerSolve(this.#core, this.#scratch, this.#turned, this.#at(l, n * n), this.#at(b, n * m), n, m);
  }

  solveUpper(l: Float64Array, b: Float64Array, n: number, m: number): void {
    upperSolve(this.#core, this.#scratch, this.#turned, this.#at(l, n * n), this.#at(b, n * m), n, m);
  }

  qr(a: Float64Array, rows: number, columns: number, r: Float64Array): void {
    if (rows < columns) throw new RangeError(`A tall block: expected at least ${columns} rows, got ${rows}.`);
    this.#at(a, rows * columns);
    this.#at(r, columns * columns);
    const work = { core: this.#core, arena: this.#arena, scratch: this.#scratch, turned: this.#turned };
    factorTall(work, a, r.subarray(0, columns * columns), rows, columns);
  }

  symmetricEigen(a: Float64Array, n: number, d: Float64Array): boolean {
    this.#at(a, n * n);
    this.#at(d, n);
    const mark = this.#arena.mark();
    const isSettled = symmetricRows(this.#core, a, d, this.#arena.takeRaw(symmetricBytes(n)), n);
    this.#arena.release(mark);
    return isSettled;
  }

  fft(re: Float64Array, im: Float64Array, n: number, isInverse = false): void {
    const [first, second] = isInverse ? [im, re] : [re, im];
    this.#plans.transform(this.#at(first, n), this.#at(second, n), n);
    if (!isInverse) return;
    this.#core.scale64(re.byteOffset, 1 / n, n);
    this.#core.scale64(im.byteOffset, 1 / n, n);
  }

  realFft(x: Float64Array, re: Float64Array, im: Float64Array, n: number): void {
    this.#plans.real(this.#at(x, n), this.#at(re, (n >> 1) + 1), this.#at(im, (n >> 1) + 1), n);
  }

  realFftInverse(re: Float64Array, im: Float64Array, x: Float64Array, n: number): void {
    this.#plans.realInverse(this.#at(re, (n >> 1) + 1), this.#at(im, (n >> 1) + 1), this.#at(x, n), n);
  }

  spectraAdd(
    cr: Float64Array,
    ci: Float64Array,
    ar: Float64Array,
    ai: Float64Array,
    br: Float64Array,
    bi: Float64Array,
    n: number,
  ): void {
    const at = (spectrum: Float64Array) => this.#at(spectrum, n);
    this.#core.spectraAdd64(at(cr), at(ci), at(ar), at(ai), at(br), at(bi), n);
  }

  hadamard64(x: Float64Array, n: number): void {
    this.#core.hadamard64(this.#at(x, powerOfTwo(n)), n);
  }

  hadamard32(x: Float32Array, n: number): void {
    this.#core.hadamard32(this.#at(x, powerOfTwo(n)), n);
  }

  cosines32(x: Float32Array, n: number, scale: number): void {
    this.#core.cosines32(this.#at(x, n), scale, n);
  }

  dot(a: Float64Array, b: Float64Array, n: number): number {
    return this.#core.dot64(this.#at(a, n), this.#at(b, n), n);
  }

  axpy(y: Float64Array, factor: number, x: Float64Array, n: number): void {
    this.#core.axpy64(this.#at(y, n), factor, this.#at(x, n), n);
  }

  scale(x: Float64Array, factor: number, n: number): void {
    this.#core.scale64(this.#at(x, n), factor, n);
  }

  shiftedDotsAdd(sums: Float64Array, a: Float64Array, b: Float64Array, n: number, shifts: number): void {
    if (n % 4 !== 0) throw new RangeError(`Shifted products over ${n} ticks: expected a whole number of fours.`);
    const reach = shifts > 0 ? n + shifts - 1 : 0;
    this.#core.shiftedDots64(this.#at(sums, 4 * shifts), this.#at(a, n), this.#at(b, reach), n, shifts);
  }

  pairedDotsAdd(sums: Float64Array, x: Float64Array, stride: number, rows: number, n: number): void {
    if (n % 4 !== 0) throw new RangeError(`Products of rows over ${n} ticks: expected a whole number of fours.`);
    const from = this.#at(x, rows > 0 ? (rows - 1) * stride + n : 0);
    this.#core.pairedDots64(this.#at(sums, 2 * rows * (rows + 1)), from, stride, rows, n);
  }

  carryForward(
    rows: Float64Array,
    stride: number,
    from: Float64Array,
    factors: { readonly re: Float64Array; readonly im: Float64Array; readonly own: Float64Array },
    real: number,
    n: number,
    changes: Float64Array,
    steps: number,
  ): void {
    if (real > n || (n - real) % 2 !== 0) {
      throw new RangeError(`${n} features, ${real} of them real: expected pairs after the real ones.`);
    }
    const re = this.#at(factors.re, n);
    const im = this.#at(factors.im, n);
    const own = this.#at(factors.own, n);
    const to = this.#at(rows, steps > 0 ? (steps - 1) * stride + n : 0);
    const first = this.#at(from, n);
    this.#core.carryForward64(to, stride, first, re, im, own, real, n, this.#at(changes, steps), steps);
  }

  orderedProductAdd(c: Float64Array, a: Float64Array, b: Float64Array, rows: number, m: number, n: number): void {
    this.#core.orderedProducts64(this.#at(c, m * n), this.#at(a, rows * m), this.#at(b, rows * n), m, n, rows);
  }

  #add(...product: ProductArguments): void {
    addProduct(this.#core, this.#scratch, ...product);
  }

  /** Steps go along the columns: the factor is the transpose of a row-major matrix of so many rows. */
  #columns(a: Numbers, rows: number, columns: number): Factor {
    const at = this.#at(a, rows * columns);
    return { at, rowStride: 1, stepStride: columns, isSingle: a instanceof Float32Array };
  }

  #rows(a: Numbers, rows: number, columns: number): Factor {
    const at = this.#at(a, rows * columns);
    return { at, rowStride: columns, stepStride: 1, isSingle: a instanceof Float32Array };
  }

  #at(array: Numbers, n: number): number {
    if (array.buffer !== this.#arena.buffer) {
      throw new RangeError('An array from elsewhere was given to the kernels: expected one from alloc64 or alloc32.');
    }
    if (!(n >= 0 && n <= array.length))
      throw new RangeError(`An array of ${array.length} numbers: expected at least ${n}.`);
    return array.byteOffset;
  }
}

function count(n: number): number {
  if (!(Number.isInteger(n) && n >= 0)) throw new RangeError(`An array of ${n} numbers: expected a whole number.`);
  return n;
}

function powerOfTwo(n: number): number {
  if (!(n >= 1) || (n & (n - 1)) !== 0)
    throw new RangeError(`A Hadamard transform of ${n} values: expected a power of two.`);
  return n;
}
