/**
 * Lagged products of many channels by blocks of a fast Fourier transform: the newest block against itself and what reaches
 * back before it, added up as spectra, and turned into lags once at the end. A block may be cut short anywhere, and the sums are
 * the same: they are linear in the newest ticks. Short stretches take short transforms.
 *
 * Overlap-save: a block of b ticks at the end of a window of n = history + b; the circular product of the two is the lagged sum
 * for every lag up to the history's length, since what wraps around lands beyond it (Oppenheim & Schafer, Discrete-Time
 * Signal Processing, section 8.7).
 */
import { MAX_HORIZON } from '@stillwell/protocol';
import { createKernels, type Kernels } from '../kernels/kernels.ts';
import { type LagGrid, type Panel, sharesOf } from './lag-grid.ts';
import type { Carrier } from './open-state.ts';

/** Spectra of one transform length, added up over blocks. */
interface Spectra {
  readonly size: number;
  /** (nc × nc) pairs i·nc + j, channel i the later; each (size / 2 + 1) real parts, then as many imaginary ones. */
  readonly pairs: readonly Float64Array[];
}

/** Which lags a sequence's entries are, and what of each counts. */
export interface Spread {
  readonly start: number;
  readonly stride: number;
  readonly share: (lag: number) => number;
}

/** A transform for short stretches is this much shorter than the next longer one, so that there are few accumulators. */
const SIZE_STEP = 4;
const SHORTEST = 256;
/** Frequencies of all pairs worked on together, so that the channels' spectra stay near the processor. */
const TILE = 512;
/** Beyond it numbers would be divided by nearly nothing. */
const LEAST_WEIGHT = 1e-30;
/** Lags spread at a time. */
const ROWS = 256;

/**
 * Length of the longest transform for a reach: a third of it at least is new ticks, and the shortest run that counts fits.
 *
 * shapes  none
 * units   ticks
 * throws  nothing
 * source  the work a tick is least at a half; a third keeps the accumulators of a reach above a power of two small
 * cost    trivial
 */
export function longestTransform(reach: number): number {
  let size = SHORTEST;
  while (2 * size < 3 * reach || size < reach + MAX_HORIZON + 2) size *= 2;
  return size;
}

/** Adds up lagged products Σ later_i(s) earlier_j(s - lag), lag 0..reach. */
export class LagSums {
  readonly #channels: number;
  readonly #grid: LagGrid;
  readonly #reach: number;
  readonly #kernels: Kernels;
  readonly #spectra: Spectra[] = [];
  readonly #how: Spread;
  /** All that is in counts this much: what is added meanwhile is divided by it, so that ageing costs nothing. */
  #weight = 1;

  /** `rows` numbers more may be asked for by `alloc`. */
  constructor(channels: number, grid: LagGrid, reach: number, how: Spread, rows = 0) {
    this.#how = how;
    this.#channels = channels;
    this.#grid = grid;
    this.#reach = reach;
    const pairs = channels * channels;
    const size = longestTransform(reach) + 2;
    const points = Math.max(0, ...grid.panels.map(({ count }) => count));
    const spectra = 1.5 * pairs * (size + 16);
    const transforms = 2 * channels * (size + 16) + 12 * size;
    const spreading = ROWS * (pairs + points) + pairs * points;
    this.#kernels = createKernels(8 * Math.ceil(spectra + transforms + spreading + rows) + 65_536);
  }

  /** Zeros in the kernels' memory, for good. */
  alloc(n: number): Float64Array {
    return this.#kernels.alloc64(n);
  }

  /** Σ a b of two arrays from `alloc`, or parts of them. */
  dot(a: Float64Array, b: Float64Array): number {
    return this.#kernels.dot(a, b, a.length);
  }

  /**
   * Takes in one block.
   *
   * shapes  earlier (nc) of (history + block), later (nc) of (block): the same ticks weighted
   * units   any
   * throws  nothing
   * source  file head
   * cost    O(nc n log n + nc² n), n the transform's length
   */
  add(earlier: readonly Float64Array[], later: readonly Float64Array[]): void {
    const kernels = this.#kernels;
    const block = later[0].length;
    const window = earlier[0].length;
    const { size, pairs } = this.#spectraOf(window);
    const half = size / 2 + 1;
    const mark = kernels.mark();
    const x = kernels.alloc64(size);
    const transform = (row: Float64Array, from: number): Float64Array => {
      const out = kernels.alloc64(2 * half);
      x.fill(0);
      x.set(row, from);
      kernels.realFft(x, out.subarray(0, half), out.subarray(half), size);
      return out;
    };
    const windows = earlier.map((row) => transform(row, 0));
    const weight = 1 / this.#weight;
    const blocks = later.map((row) => {
      const own = transform(row, window - block);
      if (weight !== 1) kernels.scale(own, weight, own.length);
      return own;
    });
    for (let from = 0; from < half; from += TILE) {
      const to = Math.min(half, from + TILE);
      for (let i = 0; i < this.#channels; i++) {
        const bRe = blocks[i].subarray(from, to);
        const bIm = blocks[i].subarray(half + from, half + to);
        for (let j = 0; j < this.#channels; j++) {
          const pair = pairs[i * this.#channels + j];
          kernels.spectraAdd(
            pair.subarray(from, to),
            pair.subarray(half + from, half + to),
            windows[j].subarray(from, to),
            windows[j].subarray(half + from, half + to),
            bRe,
            bIm,
            to - from,
          );
        }
      }
    }
    kernels.release(mark);
  }

  /** Takes all that is in along, or brings it back into sums of nothing. */
  carry(carrier: Carrier): void {
    this.#weight = carrier.number(this.#weight);
    const count = carrier.number(this.#spectra.length);
    for (let n = 0; n < count; n++) {
      const size = carrier.number(this.#spectra[n]?.size ?? 0);
      for (const pair of this.#spectraOfSize(size).pairs) carrier.fill(pair);
    }
  }

  /** Scales all that is in. */
  scale(factor: number): void {
    this.#weight *= factor;
    if (this.#weight > LEAST_WEIGHT) return;
    for (const { pairs } of this.#spectra)
      for (const pair of pairs) this.#kernels.scale(pair, this.#weight, pair.length);
    this.#weight = 1;
  }

  /**
   * Adds all that is in to sums over the grid's places and starts again from nothing.
   *
   * shapes  into (nc × nc × places)
   * units   any
   * throws  nothing
   * source  head of lag-grid.ts
   * cost    O(nc² (n log n + reach · points of a panel))
   */
  drain(into: Float64Array): void {
    const kernels = this.#kernels;
    for (const { size, pairs } of this.#spectra) {
      const half = size / 2 + 1;
      const mark = kernels.mark();
      const x = kernels.alloc64(size);
      for (const pair of pairs) {
        kernels.realFftInverse(pair.subarray(0, half), pair.subarray(half), x, size);
        if (this.#weight !== 1) kernels.scale(x, this.#weight, size);
        // The lags take the place of the spectrum they came from.
        pair.set(x);
      }
      kernels.release(mark);
      this.spread(pairs, size === longestTransform(this.#reach) ? this.#reach + 1 : size / 2, into, this.#how);
      for (const pair of pairs) pair.fill(0);
    }
    this.#weight = 1;
  }

  /**
   * Adds sequences by lag to sums over the grid's places.
   *
   * shapes  rows (at most nc × nc) of at least `length` lags, into (rows × places)
   * units   any
   * throws  nothing
   * source  head of lag-grid.ts
   * cost    O(rows length points)
   */
  spread(pairs: readonly Float64Array[], length: number, into: Float64Array, how: Spread): void {
    const { dense, lags } = this.#grid;
    const { start, stride, share } = how;
    const places = lags.length;
    for (let at = 0; at < length && start + at * stride < dense; at++) {
      const lag = start + at * stride;
      const counts = share(lag);
      if (counts > 0) for (let n = 0; n < pairs.length; n++) into[n * places + lag] += counts * pairs[n][at];
    }
    for (const panel of this.#grid.panels) {
      const from = Math.max(0, Math.ceil((panel.from - start) / stride));
      const to = Math.min(length, Math.ceil((panel.to - start) / stride));
      const counts = (at: number): number => share(start + at * stride);
      // Shares only rise or only fall, so that a panel whose ends have none has none.
      if (to <= from || (counts(from) === 0 && counts(to - 1) === 0)) continue;
      this.#spreadPanel(pairs, panel, from, to, into, how);
    }
  }

  #spreadPanel(
    pairs: readonly Float64Array[],
    panel: Panel,
    from: number,
    to: number,
    into: Float64Array,
    { start, stride, share }: Spread,
  ): void {
    const kernels = this.#kernels;
    const { place, count } = panel;
    const places = this.#grid.lags.length;
    const mark = kernels.mark();
    const sums = kernels.alloc64(pairs.length * count);
    const rows = kernels.alloc64(ROWS * pairs.length);
    const shares = kernels.alloc64(ROWS * count);
    for (let first = from; first < to; first += ROWS) {
      const some = Math.min(ROWS, to - first);
      for (let r = 0; r < some; r++) {
        const lag = start + (first + r) * stride;
        const counts = share(lag);
        sharesOf(panel, lag, shares.subarray(r * count, (r + 1) * count));
        for (let n = 0; n < pairs.length; n++) rows[r * pairs.length + n] = counts * pairs[n][first + r];
      }
      const a = rows.subarray(0, some * pairs.length);
      kernels.productAdd(sums, a, shares.subarray(0, some * count), some, pairs.length, count);
    }
    for (let n = 0; n < pairs.length; n++) {
      for (let q = 0; q < count; q++) into[n * places + place + q] += sums[n * count + q];
    }
    kernels.release(mark);
  }

  /**
   * The longest transform holds lags up to the reach, and blocks of the rest of its length; shorter ones windows of up to half
   * of theirs. Beyond these lie the negative lags that wrap around.
   */
  #spectraOf(window: number): Spectra {
    let size = longestTransform(this.#reach);
    while (size / SIZE_STEP >= Math.max(2 * window, SHORTEST)) size /= SIZE_STEP;
    return this.#spectraOfSize(size);
  }

  #spectraOfSize(size: number): Spectra {
    const found = this.#spectra.find((spectra) => spectra.size === size);
    if (found !== undefined) return found;
    const pairs = Array.from({ length: this.#channels * this.#channels }, () => this.#kernels.alloc64(size + 2));
    const spectra = { size, pairs };
    this.#spectra.push(spectra);
    return spectra;
  }
}
