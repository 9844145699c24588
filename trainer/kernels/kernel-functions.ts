/** What the kernels do: one interface, whichever loops run below it. */

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
  /**
   * Adds Σ a(t) b(t + k), k = 0 … shifts - 1, over n ticks, a whole number of fours: sums (shifts × 4) hold every fourth
   * product each, in the order of time.
   */
  shiftedDotsAdd(sums: Float64Array, a: Float64Array, b: Float64Array, n: number, shifts: number): void;
  /**
   * Adds Σ x_a(t) x_b(t) of every two rows b <= a of x, `stride` apart, over n ticks, a whole number of fours: sums
   * (rows (rows + 1) / 2 × 4) hold every fourth product each, in the order of time, pair (a, b) at a (a + 1) / 2 + b.
   */
  pairedDotsAdd(sums: Float64Array, x: Float64Array, stride: number, rows: number, n: number): void;
  /**
   * n features moved forward over `steps` ticks from `from`, a row (of `stride`) a tick: f = re f + own c of the first `real`
   * ones, f = re f + im g + own c and g = re g + im f + own c of the pairs after, c the change of the tick.
   */
  carryForward(
    rows: Float64Array,
    stride: number,
    from: Float64Array,
    factors: { readonly re: Float64Array; readonly im: Float64Array; readonly own: Float64Array },
    real: number,
    n: number,
    changes: Float64Array,
    steps: number,
  ): void;
  /** C += A'B as `productAdd`, every sum in the order of the rows. */
  orderedProductAdd(c: Float64Array, a: Float64Array, b: Float64Array, rows: number, m: number, n: number): void;
}
