/**
 * A few long rows in the kernels' memory, and the two things an incremental decomposition does with them: products of rows
 * with rows, and rows made of other rows. The coming row or block lies behind the basis, in the same memory.
 */
import { createKernels, type Kernels } from '../kernels/kernels.ts';

/** Rows by their number, all of one length. */
export class TallRows {
  readonly columns: number;
  readonly #kernels: Kernels;
  readonly #rows: Float64Array;
  /** (most combined × columns) where combinations are made before they take their places. */
  readonly #made: Float64Array;
  readonly #small: Float64Array;
  readonly #out: Float64Array;

  /**
   * Room for `rows` rows, and for combining up to `most` of them at once.
   *
   * shapes  rows of `columns`
   * units   any
   * throws  RangeError where the rows would not fit the kernels' memory of 4 GiB
   * source  none
   * cost    8 (rows + most) columns bytes
   */
  constructor(rows: number, most: number, columns: number) {
    const small = rows * rows;
    this.columns = columns;
    this.#kernels = createKernels(TallRows.bytes(rows, most, columns));
    this.#rows = this.#kernels.alloc64(rows * columns);
    this.#made = this.#kernels.alloc64(most * columns);
    this.#small = this.#kernels.alloc64(small);
    this.#out = this.#kernels.alloc64(small);
  }

  /** Bytes that such rows take. */
  static bytes(rows: number, most: number, columns: number): number {
    return 8 * ((rows + most) * columns + 2 * rows * rows) + 1024;
  }

  /** The numbers of one row, to be read and written. */
  row(i: number): Float64Array {
    return this.#rows.subarray(i * this.columns, (i + 1) * this.columns);
  }

  /** A copy of the first `count` rows. */
  first(count: number): Float64Array {
    return this.#rows.slice(0, count * this.columns);
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
    if (m === 1) {
      for (let j = 0; j < k; j++) this.#out[j] = this.#kernels.dot(this.row(a), this.row(b + j), this.columns);
    } else this.#kernels.multiplyTransposed(this.#out, this.#span(a, m), this.#span(b, k), m, this.columns, k);
    out.set(this.#out.subarray(0, m * k));
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
    this.#small.set(coefficients.subarray(0, count * from));
    this.#kernels.multiply(this.#made, this.#small, this.#rows, count, from, this.columns);
    this.#rows.set(this.#made.subarray(0, count * this.columns));
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
    if (count === 1) {
      for (let j = 0; j < from; j++) this.#kernels.axpy(this.row(at), -coefficients[j], this.row(j), this.columns);
      return;
    }
    this.#small.set(coefficients.subarray(0, count * from));
    this.#kernels.multiplyTake(this.#span(at, count), this.#small, this.#rows, count, from, this.columns);
  }

  #span(at: number, count: number): Float64Array {
    return this.#rows.subarray(at * this.columns, (at + count) * this.columns);
  }
}
