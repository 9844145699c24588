/**
 * A few long rows in the kernels' memory, and the two things an incremental decomposition does with them: products of rows
 * with rows, and rows made of other rows. The coming row or block lies behind the basis, in the same memory.
 */
import type { Kernels } from '../kernels/kernels.ts';

/** Rows by their number, all of one length. Small matrices given and filled are of the same kernels' memory. */
export class TallRows {
  readonly columns: number;
  readonly #kernels: Kernels;
  readonly #all: Float64Array;
  readonly #each: readonly Float64Array[];
  /** (most combined × columns) where combinations are made before they take their places. */
  readonly #made: Float64Array;

  /**
   * Room for `rows` rows, and for combining up to `most` of them at once.
   *
   * shapes  rows of `columns`
   * units   any
   * throws  RangeError where the kernels' memory is too small
   * source  none
   * cost    `bytes` of the kernels' memory
   */
  constructor(kernels: Kernels, rows: number, most: number, columns: number) {
    this.columns = columns;
    this.#kernels = kernels;
    this.#all = kernels.alloc64(rows * columns);
    this.#made = kernels.alloc64(most * columns);
    this.#each = Array.from({ length: rows }, (_, i) => this.#span(i, 1));
  }

  /** Bytes that such rows take. */
  static bytes(rows: number, most: number, columns: number): number {
    return 8 * (rows + most) * columns + 128;
  }

  /** The numbers of one row, to be read and written. */
  row(i: number): Float64Array {
    return this.#each[i];
  }

  /** A copy of the first `count` rows. */
  first(count: number): Float64Array {
    return this.#all.slice(0, count * this.columns);
  }

  /**
   * Products of rows a … a + m − 1 with rows b … b + k − 1.
   *
   * shapes  out (m × k)
   * units   as the rows' product
   * throws  nothing
   * source  definition
   * cost    m k columns multiplications
   */
  products(a: number, m: number, b: number, k: number, out: Float64Array): void {
    this.#kernels.multiplyTransposed(out, this.#span(a, m), this.#span(b, k), m, this.columns, k);
  }

  /** The same for one row with the first `count`. */
  dots(a: number, count: number, out: Float64Array): void {
    this.#kernels.multiplyTransposed(out, this.#each[a], this.#all, 1, this.columns, count);
  }

  /** The square of one row's length. */
  square(a: number): number {
    return this.#kernels.dot(this.#each[a], this.#each[a], this.columns);
  }

  /**
   * Rows 0 … count − 1 become combinations of rows 0 … from − 1.
   *
   * shapes  coefficients (count × from)
   * units   any
   * throws  nothing
   * source  definition
   * cost    count · from · columns multiplications
   */
  combine(coefficients: Float64Array, from: number, count: number): void {
    this.#kernels.multiply(this.#made, coefficients, this.#all, count, from, this.columns);
    this.#all.set(this.#made.subarray(0, count * this.columns));
  }

  /**
   * Combinations of rows 0 … from − 1 are taken from rows at … at + count − 1.
   *
   * shapes  coefficients (count × from)
   * units   any
   * throws  nothing
   * source  definition
   * cost    count · from · columns multiplications
   */
  takeAway(coefficients: Float64Array, from: number, at: number, count: number): void {
    this.#kernels.multiplyTake(this.#span(at, count), coefficients, this.#all, count, from, this.columns);
  }

  #span(at: number, count: number): Float64Array {
    return this.#all.subarray(at * this.columns, (at + count) * this.columns);
  }
}
