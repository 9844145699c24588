/**
 * Dense products, factors, solves and transforms at the speed of the machine's vector lanes, on arrays that live in one
 * memory of a fixed size. Loops are WebAssembly with SIMD; where the machine has none, or on request, the same loops in
 * plain numbers give the same bits. For matrices of a few dozen rows the functions of trainer/linalg do as well.
 */
import { Arena } from './arena.ts';
import type { Core } from './core.ts';
import { FourierPlans } from './fourier.ts';
import { hasSimd, loadCore } from './load.ts';
import { factorTall } from './orthogonal.ts';
import { addProduct, type Factor, mirrorLower, PANEL_BYTES } from './products.ts';
import { scalarFourier } from './scalar-fourier.ts';
import { scalarProducts } from './scalar-products.ts';
import { scalarSymmetric } from './scalar-symmetric.ts';
import { scalarTriangular } from './scalar-triangular.ts';
import { scalarVectors } from './scalar-vectors.ts';
import { symmetricBytes, symmetricRows } from './symmetric.ts';
import { BLOCK_BYTES, factorLower, lowerSolve, upperSolve } from './triangular.ts';
import { webAssembly } from './web-assembly.ts';

/** A matrix or vector of this memory in either precision; sums are float64 always. */
export type Numbers = Float64Array | Float32Array;

/**
 * The kernels over one memory. All arrays must come from `alloc64` and `alloc32` (or be subarrays of those), row-major;
 * results must not overlap the arguments. A wrong length is a RangeError.
 */
export interface Kernels {
  /** False where the loops run in plain numbers. */
  readonly isSimd: boolean;
  /** Zeros. */
  alloc64(n: number): Float64Array;
  alloc32(n: number): Float32Array;
  /** What was handed out after a mark is free again when that mark is released. */
  mark(): number;
  release(mark: number): void;
  /** C += A'A, A (rows × columns), C symmetric (columns × columns). */
  gramAdd(c: Float64Array, a: Numbers, rows: number, columns: number): void;
  /** C += A'B, A (rows × m), B (rows × n), C (m × n). */
  productAdd(c: Float64Array, a: Numbers, b: Numbers, rows: number, m: number, n: number): void;
  /** C = A B, A (m × k), B (k × n). */
  multiply(c: Float64Array, a: Numbers, b: Numbers, m: number, k: number, n: number): void;
  /** C = A B', A (m × k), B (n × k). */
  multiplyTransposed(c: Float64Array, a: Numbers, b: Numbers, m: number, k: number, n: number): void;
  /** C -= A B, A (m × k), B (k × n). */
  multiplyTake(c: Float64Array, a: Numbers, b: Numbers, m: number, k: number, n: number): void;
  /** Lower factor of A = L L' in place, upper triangle zero; -1, or the row whose pivot is not positive (A is spoilt then). */
  cholesky(a: Float64Array, n: number): number;
  /** Solves L X = B in place, B (n × m). */
  solveLower(l: Float64Array, b: Float64Array, n: number, m: number): void;
  /** Solves L' X = B in place. */
  solveUpper(l: Float64Array, b: Float64Array, n: number, m: number): void;
  /** A = Q R of a tall block, A overwritten with Q, the diagonal of R not negative. */
  qr(a: Float64Array, rows: number, columns: number, r: Float64Array): void;
  /**
   * Eigenvectors of a small symmetric A as rows of A itself, values in d (n), falling; only the lower triangle is read. False
   * where a value does not settle. 8 n (n + 4) bytes of scratch.
   */
  symmetricEigen(a: Float64Array, n: number, d: Float64Array): boolean;
  /** X_k = Σ x_t exp(-2πi kt/n) in place; the inverse divides by n. n a power of two, 16 n bytes of scratch and of tables. */
  fft(re: Float64Array, im: Float64Array, n: number, isInverse?: boolean): void;
  /** The first n/2 + 1 values of the transform of n real ones. */
  realFft(x: Float64Array, re: Float64Array, im: Float64Array, n: number): void;
  /** Back again; re and im are overwritten. */
  realFftInverse(re: Float64Array, im: Float64Array, x: Float64Array, n: number): void;
  /** c += conj(a) b for n values of spectra. */
  spectraAdd(
    cr: Float64Array,
    ci: Float64Array,
    ar: Float64Array,
    ai: Float64Array,
    br: Float64Array,
    bi: Float64Array,
    n: number,
  ): void;
  /** Walsh-Hadamard transform in place, natural order, no division. n a power of two. */
  hadamard64(x: Float64Array, n: number): void;
  hadamard32(x: Float32Array, n: number): void;
  /** x = scale cos x in place; error of the cosine at most 1.3e-7 for |x| up to 2^20. */
  cosines32(x: Float32Array, n: number, scale: number): void;
  dot(a: Float64Array, b: Float64Array, n: number): number;
  /** y += factor x. */
  axpy(y: Float64Array, factor: number, x: Float64Array, n: number): void;
  /** x *= factor. */
  scale(x: Float64Array, factor: number, n: number): void;
}

/**
 * Makes kernels with `bytes` of memory for arrays, scratch and tables. It never grows, so views stay valid.
 *
 * shapes  bytes: 0 to 4 GiB; the panels of products are on top of it
 * units   bytes
 * throws  TrainError 'file' where the compiled kernels are missing or damaged; RangeError for a size no memory can have
 * source  this project's assembly/
 * cost    the memory is touched only as it is used
 */
export function createKernels(bytes: number, mode: 'simd' | 'scalar' = 'simd'): Kernels {
  const pages = Arena.pages(bytes, PANEL_BYTES + BLOCK_BYTES);
  const isSimd = mode === 'simd' && hasSimd();
  if (!isSimd) {
    const buffer = new ArrayBuffer(pages * 65_536);
    return new MemoryKernels(false, scalarCore(buffer), new Arena(buffer));
  }
  const memory = new webAssembly!.Memory({ initial: pages, maximum: pages });
  return new MemoryKernels(true, loadCore(memory), new Arena(memory.buffer));
}

function scalarCore(buffer: ArrayBuffer): Core {
  return {
    ...scalarProducts(buffer),
    ...scalarTriangular(buffer),
    ...scalarFourier(buffer),
    ...scalarVectors(buffer),
    ...scalarSymmetric(buffer),
  };
}

class MemoryKernels implements Kernels {
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
    addProduct(
      this.#core,
      this.#scratch,
      this.#at(c, columns * columns),
      columns,
      factor,
      factor,
      columns,
      columns,
      rows,
      options,
    );
    mirrorLower(c, columns);
  }

  productAdd(c: Float64Array, a: Numbers, b: Numbers, rows: number, m: number, n: number): void {
    const left = this.#columns(a, rows, m);
    const right = this.#columns(b, rows, n);
    addProduct(this.#core, this.#scratch, this.#at(c, m * n), n, left, right, m, n, rows);
  }

  multiply(c: Float64Array, a: Numbers, b: Numbers, m: number, k: number, n: number): void {
    this.#at(c, m * n);
    c.fill(0, 0, m * n);
    addProduct(this.#core, this.#scratch, c.byteOffset, n, this.#rows(a, m, k), this.#columns(b, k, n), m, n, k);
  }

  multiplyTransposed(c: Float64Array, a: Numbers, b: Numbers, m: number, k: number, n: number): void {
    this.#at(c, m * n);
    c.fill(0, 0, m * n);
    addProduct(this.#core, this.#scratch, c.byteOffset, n, this.#rows(a, m, k), this.#rows(b, n, k), m, n, k);
  }

  multiplyTake(c: Float64Array, a: Numbers, b: Numbers, m: number, k: number, n: number): void {
    const options = { isTaken: true };
    const left = this.#rows(a, m, k);
    addProduct(this.#core, this.#scratch, this.#at(c, m * n), n, left, this.#columns(b, k, n), m, n, k, options);
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
