/**
 * Folds rows in one at a time. The basis is kept as C Z: Z the basis as it last stood followed by what was left of each row
 * since, C a small matrix that alone is turned at every row; long rows are read twice for a row and turned only when the
 * spare places are full. The small problem is a diagonal one and an outer product, solved as such.
 */
import { createKernels, type Kernels } from '../kernels/kernels.ts';
import type { Fold } from './incremental-svd.ts';
import { RankOneEigen } from './rank-one-eigen.ts';
import { measureOrthogonality, ORTHOGONALITY_BOUND, orthonormaliseRows } from './tall-orthonormal.ts';
import { TallRows } from './tall-rows.ts';

/** As for blocks: below these shares of a row's square, project again; nothing but rounding. */
const SMALL_LEFT = 1e-4;
const VANISHED = 1e-26;
/** Turnings of the long rows between measurements of the basis. */
const MEASURE_EVERY = 8;

/** See the file's head. Memory: (2 rank + SPARE) rows. */
export class RowFold implements Fold {
  /** Places for what is left of rows; more make long rows turn more seldom and be read longer. */
  static readonly SPARE = 32;
  readonly #kernels: Kernels;
  readonly #most: number;
  readonly #capacity: number;
  readonly #rows: TallRows;
  /** (rank × width) C; the same once more with a row and a column for what is new; and W. */
  readonly #mix: Float64Array;
  readonly #wide: Float64Array;
  readonly #w: Float64Array;
  readonly #along: Float64Array;
  readonly #p: Float64Array;
  readonly #z: Float64Array;
  readonly #d: Float64Array;
  readonly #eigen: RankOneEigen;
  readonly #products: Float64Array;
  readonly values: Float64Array;
  /** Long rows in use; the coming row is written after them. */
  #width = 0;
  rank = 0;
  discarded = 0;
  orthogonality = 0;
  corrections = 0;
  #turns = 0;

  constructor(columns: number, most: number) {
    this.#most = most;
    this.#capacity = most + RowFold.SPARE;
    const kernels = createKernels(RowFold.bytes(columns, most));
    this.#kernels = kernels;
    this.#rows = new TallRows(kernels, this.#capacity, most, columns);
    this.#mix = kernels.alloc64(most * this.#capacity);
    this.#wide = kernels.alloc64((most + 1) * this.#capacity);
    this.#w = kernels.alloc64((most + 1) * (most + 1));
    this.#products = kernels.alloc64(most * most);
    this.#along = kernels.alloc64(this.#capacity);
    this.#p = new Float64Array(most);
    this.#z = new Float64Array(most + 1);
    this.#d = new Float64Array(most + 1);
    this.#eigen = new RankOneEigen(most + 1);
    this.values = new Float64Array(most);
  }

  /** Bytes that such a fold takes in the kernels' memory. */
  static bytes(columns: number, most: number): number {
    const capacity = most + RowFold.SPARE;
    return (
      TallRows.bytes(capacity, most, columns) + 8 * ((2 * most + 1) * capacity + capacity + 2 * (most + 1) ** 2) + 1024
    );
  }

  rowAt(_: number): Float64Array {
    return this.#rows.row(this.#width);
  }

  fade(factor: number): void {
    const root = Math.sqrt(factor);
    for (let k = 0; k < this.rank; k++) this.values[k] *= root;
    this.discarded *= factor;
  }

  basis(): Float64Array {
    this.#turnLongRows();
    return this.#rows.first(this.rank);
  }

  fold(_: number): void {
    const square = this.#rows.square(this.#width);
    this.#p.fill(0);
    let left = this.#project(square);
    if (this.rank > 0 && left < SMALL_LEFT * square) left = this.#project(square);
    const isNew = left > VANISHED * square;
    const size = this.rank + (isNew ? 1 : 0);
    if (size === 0) return;
    for (let k = 0; k < this.rank; k++) {
      this.#d[k] = this.values[k] * this.values[k];
      this.#z[k] = this.#p[k];
    }
    if (isNew) {
      this.#d[this.rank] = 0;
      this.#z[this.rank] = Math.sqrt(left);
    } else this.discarded += left;
    this.#eigen.solve(this.#d, this.#z, size);
    this.#turnMix(size, isNew ? 1 / Math.sqrt(left) : 0);
    if (this.#width === this.#capacity) this.#turnLongRows();
  }

  /** Takes the row's part along the basis away from it, adding that part to p; gives the square of what is left. */
  #project(square: number): number {
    if (this.rank === 0) return square;
    const [width, along, mix] = [this.#width, this.#along, this.#mix];
    this.#rows.dots(width, width, along);
    const part = this.#z;
    for (let k = 0; k < this.rank; k++) {
      let sum = 0;
      for (let j = 0; j < width; j++) sum += mix[k * width + j] * along[j];
      part[k] = sum;
      this.#p[k] += sum;
    }
    along.fill(0, 0, width);
    for (let k = 0; k < this.rank; k++) {
      for (let j = 0; j < width; j++) along[j] += part[k] * mix[k * width + j];
    }
    this.#rows.takeAway(along, width, width, 1);
    return this.#rows.square(width);
  }

  /** C ← W [C 0; 0 1/ρ], its last row let go where there is one too many; 1/ρ of 0: nothing new. */
  #turnMix(size: number, reciprocal: number): void {
    const [wide, old] = [this.#wide, this.rank];
    const { values, vectors } = this.#eigen;
    const kept = Math.min(size, this.#most);
    const width = this.#width + (size > old ? 1 : 0);
    wide.fill(0, 0, size * width);
    for (let k = 0; k < old; k++) wide.set(this.#mix.subarray(k * this.#width, (k + 1) * this.#width), k * width);
    if (size > old) wide[size * width - 1] = reciprocal;
    this.#w.set(vectors.subarray(0, kept * size));
    this.#kernels.multiply(this.#mix, this.#w, wide, kept, size, width);
    for (let r = 0; r < kept; r++) this.values[r] = Math.sqrt(Math.max(0, values[r]));
    for (let r = kept; r < size; r++) this.discarded += Math.max(0, values[r]);
    this.rank = kept;
    this.#width = width;
  }

  /** The basis itself, Z ← C Z and C ← I. */
  #turnLongRows(): void {
    if (this.rank === 0) return;
    this.#rows.combine(this.#mix, this.#width, this.rank);
    this.#mix.fill(0);
    for (let k = 0; k < this.rank; k++) this.#mix[k * this.rank + k] = 1;
    this.#width = this.rank;
    this.#turns++;
    if (this.#turns % MEASURE_EVERY === 0) this.#keepOrthonormal();
  }

  #keepOrthonormal(): void {
    this.orthogonality = measureOrthogonality(this.#rows, this.rank, this.#products);
    if (this.orthogonality <= ORTHOGONALITY_BOUND) return;
    orthonormaliseRows(this.#rows, this.rank, this.#products);
    this.corrections++;
    this.orthogonality = measureOrthogonality(this.#rows, this.rank, this.#products);
  }
}
