/**
 * The leading singular values and right singular vectors of a stream of rows of any width, in memory for the rank kept and
 * one block of rows: a factored covariance, X'X ≈ V diag(s²) V' + what was let go. Rows are held against the basis, what is
 * left of them is made orthonormal through the products of the block's own rows, and a small symmetric problem of
 * (rank + block) turns both into the new basis; nothing of (columns × columns) is ever formed. The energy let go is summed,
 * to be given back as a ridge where the covariance is inverted. Not for singular values below 1e-7 of the largest: the small
 * problem is one of squares.
 */

import { PANEL_BYTES } from '../kernels/products.ts';
import { BlockFold } from './incremental-svd-block.ts';
import { RowFold } from './incremental-svd-row.ts';

/** What is to be decomposed, and how. */
export interface SvdShape {
  /** Numbers in a row, 1 or more. */
  readonly columns: number;
  /** Singular triplets kept, 1 or more. */
  readonly rank: number;
  /** Rows folded in together, 1 or more; 32 by default. The most rows before they show in the factors without `flush`. */
  readonly blockRows?: number;
  /** Rows after which a row's weight has halved; null, the default: never. */
  readonly halfLifeRows?: number | null;
}

/** What is known of the rows so far. */
export interface SvdFactors {
  readonly columns: number;
  /** Triplets there are: fewer than the rank while the rows span less. */
  readonly rank: number;
  /** (rank) falling. */
  readonly singularValues: Float64Array;
  /** (rank × columns) row-major: rows are right singular vectors. */
  readonly basis: Float64Array;
  /** Rows taken in. */
  readonly rows: number;
  /** Their sum of weights: the same without forgetting. */
  readonly weight: number;
  /** Energy of the rows (sum of weighted squares). */
  readonly energy: number;
  /** Energy not in the factors any more, Σ of the squares of singular values let go. */
  readonly discarded: number;
  /** Largest departure of the basis' products from the unit matrix, as measured last, and how often it was set right. */
  readonly orthogonality: number;
  readonly corrections: number;
}

/** The ridge that gives discarded energy back: its share of each column. */
export function ridgeOf({ discarded, columns }: Pick<SvdFactors, 'discarded' | 'columns'>): number {
  return discarded / columns;
}

/** How one block of rows is folded in; `block` are its rows, in the fold's own memory. */
export interface Fold {
  readonly rank: number;
  readonly values: Float64Array;
  readonly discarded: number;
  readonly orthogonality: number;
  readonly corrections: number;
  /** Where row i of the coming block is to be written. */
  rowAt(i: number): Float64Array;
  /** Folds in the first `count` rows written. */
  fold(count: number): void;
  /** Scales all that is known by a factor on energies. */
  fade(factor: number): void;
  basis(): Float64Array;
}

const DEFAULT_BLOCK = 32;

/**
 * Takes rows one after another and keeps their leading singular triplets.
 *
 * shapes  rows of `columns`
 * units   as the rows'; the caller scales columns that are to count alike
 * throws  RangeError for a shape that cannot be, a row of another length, or one that is not finite (nothing of its block
 *         that came before it is lost)
 * source  Brand, Linear Algebra and its Applications 415 (2006), sections 2 to 4.1; several rows at a time as there in
 *         equations 2-4; the residual's basis by Cholesky factor of its products instead of Gram and Schmidt
 * cost    about columns × (2 rank + block/2 + rank²/block + rank) multiplications a row; memory 8 columns (2 rank + block)
 *         bytes
 */
export class IncrementalSvd {
  readonly columns: number;
  readonly #fold: Fold;
  readonly #blockRows: number;
  /** Factor on energies for each row's age. */
  readonly #fade: number;
  #waiting = 0;
  #rows = 0;
  #weight = 0;
  #energy = 0;

  constructor({ columns, rank, blockRows = DEFAULT_BLOCK, halfLifeRows = null }: SvdShape) {
    requireWhole('columns', columns);
    requireWhole('rank', rank);
    requireWhole('blockRows', blockRows);
    if (halfLifeRows !== null && !(halfLifeRows > 0 && Number.isFinite(halfLifeRows)))
      throw new RangeError(`halfLifeRows: expected a number above 0 or null, got ${halfLifeRows}`);
    this.columns = columns;
    this.#blockRows = blockRows;
    this.#fade = halfLifeRows === null ? 1 : 2 ** (-1 / halfLifeRows);
    const kept = Math.min(rank, columns);
    this.#fold = blockRows === 1 ? new RowFold(columns, kept) : new BlockFold(columns, kept, blockRows);
  }

  /** Takes one row. */
  push(row: ArrayLike<number>): void {
    if (row.length !== this.columns)
      throw new RangeError(`a row of the decomposition: expected ${this.columns} numbers, got ${row.length}`);
    const to = this.#fold.rowAt(this.#waiting);
    to.set(row);
    const square = squareOf(to);
    if (!Number.isFinite(square))
      throw new RangeError(`row ${this.#rows} of the decomposition holds a number that is not finite`);
    this.#rows++;
    this.#weight = this.#fade * this.#weight + 1;
    this.#energy = this.#fade * this.#energy + square;
    this.#waiting++;
    if (this.#waiting === this.#blockRows) this.flush();
  }

  /** Folds in rows that wait for their block to fill. */
  flush(): void {
    const count = this.#waiting;
    if (count === 0) return;
    if (this.#fade !== 1) {
      this.#fold.fade(this.#fade ** count);
      for (let i = 0; i < count - 1; i++) scale(this.#fold.rowAt(i), this.#fade ** (0.5 * (count - 1 - i)));
    }
    this.#waiting = 0;
    this.#fold.fold(count);
  }

  /** What is known, rows that wait included. */
  factors(): SvdFactors {
    this.flush();
    const { rank, values, discarded, orthogonality, corrections } = this.#fold;
    return Object.freeze({
      columns: this.columns,
      rank,
      singularValues: values.slice(0, rank),
      basis: this.#fold.basis(),
      rows: this.#rows,
      weight: this.#weight,
      energy: this.#energy,
      discarded,
      orthogonality,
      corrections,
    });
  }
}

/** Bytes that a decomposition of that shape takes. */
export function svdBytes({ columns, rank, blockRows = DEFAULT_BLOCK }: SvdShape): number {
  const kept = Math.min(rank, columns);
  const own = blockRows === 1 ? RowFold.bytes(columns, kept) : BlockFold.bytes(columns, kept, blockRows);
  return own + PANEL_BYTES + 8 * 4 * (kept + blockRows) ** 2;
}

function requireWhole(name: string, value: number): void {
  if (!(Number.isSafeInteger(value) && value >= 1)) throw new RangeError(`${name}: expected 1 or more, got ${value}`);
}

function squareOf(row: Float64Array): number {
  let s0 = 0;
  let s1 = 0;
  let i = 0;
  for (; i + 1 < row.length; i += 2) {
    s0 += row[i] * row[i];
    s1 += row[i + 1] * row[i + 1];
  }
  return i < row.length ? s0 + s1 + row[i] * row[i] : s0 + s1;
}

function scale(row: Float64Array, factor: number): void {
  for (let i = 0; i < row.length; i++) row[i] *= factor;
}
