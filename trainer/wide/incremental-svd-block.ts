/**
 * Folds blocks of rows into a rank-limited basis. With rows X (b × n), basis V (k × n) and values s: P = X V', E = X − P V
 * (what is left), E E' = L L'; then [diag(s) V; X] = K [V; L⁻¹E] with K = [diag(s) 0; P L], and the eigenvectors of K'K turn
 * [V; L⁻¹E] into the new basis. L⁻¹E is never formed: it is folded into the turning. Where little is lost by it, neither is
 * E: E E' = X X' − P P', and the turning goes to V and X straight.
 */
import { createKernels, type Kernels } from '../kernels/kernels.ts';
import type { Fold } from './incremental-svd.ts';
import { measureOrthogonality, ORTHOGONALITY_BOUND, orthonormaliseRows } from './tall-orthonormal.ts';
import { TallRows } from './tall-rows.ts';

/** Blocks between measurements of the basis. */
const MEASURE_EVERY = 16;
/**
 * A row of which less than this share of the square is left is held against the basis a second time ("twice is enough":
 * Giraud, Langou & Rozložník, Computers and Mathematics with Applications 50, 2005): rounding of the first is then felt.
 */
const SMALL_LEFT = 1e-4;
/** Below these shares of a row's square, and of what is left of it, there is nothing but rounding. */
const VANISHED = 1e-26;
const VANISHED_OF_LEFT = 1e-13;

/** See the file's head. Memory: (2 rank + block) rows. */
export class BlockFold implements Fold {
  readonly #kernels: Kernels;
  readonly #most: number;
  /** Rows 0 … rank − 1 are the basis, rows #most … the block: fixed places, so that rows can be written at any time. */
  readonly #rows: TallRows;
  /** ((most + block) × block) products of all rows with the block's: P' above, X X' from row #most. */
  readonly #all: Float64Array;
  readonly #p: Float64Array;
  readonly #again: Float64Array;
  readonly #left: Float64Array;
  readonly #factor: Float64Array;
  readonly #joint: Float64Array;
  readonly #small: Float64Array;
  readonly #share: Float64Array;
  readonly #taken: Float64Array;
  readonly #turn: Float64Array;
  readonly #squares: Float64Array;
  readonly #d: Float64Array;
  readonly #e: Float64Array;
  readonly #pivots: Int32Array;
  readonly values: Float64Array;
  rank = 0;
  discarded = 0;
  orthogonality = 0;
  corrections = 0;
  #folds = 0;

  constructor(columns: number, most: number, block: number) {
    const size = most + block;
    const kernels = createKernels(BlockFold.bytes(columns, most, block));
    this.#kernels = kernels;
    this.#most = most;
    this.#rows = new TallRows(kernels, size, most, columns);
    this.#all = kernels.alloc64(size * block);
    this.#p = kernels.alloc64(block * most);
    this.#again = kernels.alloc64(block * most);
    this.#left = kernels.alloc64(block * block);
    this.#factor = new Float64Array(block * block);
    this.#joint = kernels.alloc64(block * size);
    this.#small = kernels.alloc64(size * size);
    this.#share = kernels.alloc64(most * block);
    this.#taken = kernels.alloc64(most * most);
    this.#turn = kernels.alloc64(most * size);
    this.#squares = new Float64Array(block);
    this.#d = kernels.alloc64(size);
    this.#e = new Float64Array(size);
    this.#pivots = new Int32Array(block);
    this.values = new Float64Array(most);
  }

  /** Bytes that such a fold takes in the kernels' memory. */
  static bytes(columns: number, most: number, block: number): number {
    const size = most + block;
    return TallRows.bytes(size, most, columns) + 8 * (size * (2 * size + 5 + most + 3 * block) + size ** 2) + 1024;
  }

  rowAt(i: number): Float64Array {
    return this.#rows.row(this.#most + i);
  }

  fade(factor: number): void {
    const root = Math.sqrt(factor);
    for (let k = 0; k < this.rank; k++) this.values[k] *= root;
    this.discarded *= factor;
  }

  basis(): Float64Array {
    return this.#rows.first(this.rank);
  }

  fold(count: number): void {
    const isFormed = this.#project(count);
    const { found, letGo } = factorPivoted(this.#left, this.#squares, count, this.#factor, this.#pivots);
    this.discarded += letGo;
    const old = this.rank;
    this.#decide(count, found);
    this.#turnBasis(count, found, old, isFormed);
    this.#folds++;
    if (this.#folds % MEASURE_EVERY === 0) this.#keepOrthonormal();
  }

  /** P, and the products of what is left of the rows; true where the rows themselves became what is left of them. */
  #project(count: number): boolean {
    const k = this.rank;
    const [all, p, left, squares, most] = [this.#all, this.#p, this.#left, this.#squares, this.#most];
    this.#rows.products(0, most + count, most, count, all);
    for (let i = 0; i < count; i++) for (let c = 0; c < k; c++) p[i * k + c] = all[c * count + i];
    this.#kernels.multiplyTransposed(left, p, p, count, k, count);
    let least = 1;
    for (let i = 0, at = 0; i < count; i++) {
      for (let j = 0; j < count; j++, at++) left[at] = all[most * count + at] - left[at];
      squares[i] = all[(most + i) * count + i];
      if (squares[i] > 0) least = Math.min(least, left[i * count + i] / squares[i]);
    }
    if (k === 0 || least > SMALL_LEFT) return false;
    this.#rows.takeAway(p, k, most, count);
    this.#rows.products(most, count, 0, k, this.#again);
    this.#rows.takeAway(this.#again, k, most, count);
    for (let i = 0; i < count * k; i++) p[i] += this.#again[i];
    this.#rows.products(most, count, most, count, left);
    return true;
  }

  /** Eigenvectors of K'K as rows of `small`, and the new values. */
  #decide(count: number, found: number): void {
    const k = this.rank;
    const size = k + found;
    const [small, joint] = [this.#small, this.#joint];
    for (let i = 0; i < count; i++) {
      joint.set(this.#p.subarray(i * k, i * k + k), i * size);
      joint.set(this.#factor.subarray(i * count, i * count + found), i * size + k);
    }
    small.fill(0, 0, size * size);
    for (let c = 0; c < k; c++) small[c * size + c] = this.values[c] * this.values[c];
    this.#kernels.gramAdd(small, joint, count, size);
    if (!this.#kernels.symmetricEigen(small, size, this.#d))
      throw new RangeError('an eigenvalue of the running decomposition did not settle');
    this.rank = Math.min(this.#most, size);
    for (let c = 0; c < this.rank; c++) this.values[c] = Math.sqrt(Math.max(0, this.#d[c]));
    for (let c = this.rank; c < size; c++) this.discarded += Math.max(0, this.#d[c]);
  }

  /** New basis = W₁ V + (W₂ L⁻¹) E, or, E not formed, (W₁ − W₂ L⁻¹ P) V + (W₂ L⁻¹) X. */
  #turnBasis(count: number, found: number, old: number, isFormed: boolean): void {
    const [turn, small, share, kept] = [this.#turn, this.#small, this.#share, this.rank];
    const size = old + found;
    const width = this.#most + count;
    share.fill(0, 0, kept * count);
    for (let r = 0; r < kept; r++) {
      solveRow(this.#factor, this.#pivots, count, found, small, r * size + old, this.#e);
      for (let c = 0; c < found; c++) share[r * count + this.#pivots[c]] = this.#e[c];
    }
    if (isFormed) this.#taken.fill(0, 0, kept * old);
    else this.#kernels.multiply(this.#taken, share, this.#p, kept, count, old);
    turn.fill(0, 0, kept * width);
    for (let r = 0; r < kept; r++) {
      for (let c = 0; c < old; c++) turn[r * width + c] = small[r * size + c] - this.#taken[r * old + c];
      turn.set(share.subarray(r * count, (r + 1) * count), r * width + this.#most);
    }
    this.#rows.combine(turn, width, kept);
  }

  #keepOrthonormal(): void {
    this.orthogonality = measureOrthogonality(this.#rows, this.rank, this.#small);
    if (this.orthogonality <= ORTHOGONALITY_BOUND) return;
    orthonormaliseRows(this.#rows, this.rank, this.#small);
    this.corrections++;
    this.orthogonality = measureOrthogonality(this.#rows, this.rank, this.#small);
  }
}

/**
 * Cholesky factor of the products of a block's rows, largest pivot first: row i of `l` is row i of the block in directions of
 * falling size, direction c that of row pivots[c]. Directions that are nothing but rounding end it; what they held is told.
 */
function factorPivoted(
  a: Float64Array,
  squares: Float64Array,
  count: number,
  l: Float64Array,
  pivots: Int32Array,
): { found: number; letGo: number } {
  const rest = Float64Array.from({ length: count }, (_, i) => a[i * count + i]);
  const floor = rest.map((left, i) => Math.max(VANISHED * squares[i], VANISHED_OF_LEFT * left));
  const isTaken = new Uint8Array(count);
  l.fill(0);
  let found = 0;
  for (; found < count; found++) {
    let best = -1;
    for (let i = 0; i < count; i++) {
      if (isTaken[i] === 0 && rest[i] > floor[i] && (best === -1 || rest[i] > rest[best])) best = i;
    }
    if (best === -1) break;
    isTaken[best] = 1;
    pivots[found] = best;
    const pivot = Math.sqrt(rest[best]);
    for (let i = 0; i < count; i++) {
      if (isTaken[i] === 1 && i !== best) continue;
      let sum = a[i * count + best];
      for (let c = 0; c < found; c++) sum -= l[i * count + c] * l[best * count + c];
      l[i * count + found] = i === best ? pivot : sum / pivot;
      rest[i] -= l[i * count + found] ** 2;
    }
  }
  let letGo = 0;
  for (let i = 0; i < count; i++) if (isTaken[i] === 0) letGo += Math.max(0, rest[i]);
  return { found, letGo };
}

/** y with y L = x over the pivots' rows. */
function solveRow(
  l: Float64Array,
  pivots: Int32Array,
  count: number,
  found: number,
  x: Float64Array,
  at: number,
  y: Float64Array,
): void {
  for (let c = found - 1; c >= 0; c--) {
    let sum = x[at + c];
    for (let j = c + 1; j < found; j++) sum -= y[j] * l[pivots[j] * count + c];
    y[c] = sum / l[pivots[c] * count + c];
  }
}
