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
  /** The row to be transformed. */
  readonly x: Float64Array;
  /** Blocks that were transformed and not yet added, the oldest first, `fresh` of them. */
  readonly blocks: readonly Block[];
  fresh: number;
  readonly tiles: readonly Tile[];
}

/** The spectra of one block, each as those of pairs. */
interface Block {
  /** (nc) of the ticks with what reaches back before them, and of the block alone. */
  readonly windows: readonly Float64Array[];
  readonly own: readonly Float64Array[];
}

/** Real and imaginary parts of some frequencies of a spectrum. */
interface Part {
  readonly re: Float64Array;
  readonly im: Float64Array;
}

/** The same frequencies of all spectra, kept since views are dear to make. */
interface Tile {
  readonly pairs: readonly Part[];
  readonly blocks: readonly { readonly windows: readonly Part[]; readonly own: readonly Part[] }[];
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
const TILE = 1024;
/** Blocks added together: the spectra of pairs are more than fits near the processor, and each is fetched once for all of them. */
const TOGETHER = 2;
/** Beyond it numbers would be divided by nearly nothing. */
const LEAST_WEIGHT = 1e-30;
/** Lags spread at a time. */
const ROWS = 256;
/** Numbers of a cache line, as common processors have them. */
const LINE = 8;

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
    const transforms = 1.5 * (2 * TOGETHER * channels + 1) * (size + 16) + 12 * size;
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
    const spectra = this.#spectraOf(window);
    const { windows, own } = spectra.blocks[spectra.fresh];
    const weight = 1 / this.#weight;
    for (let c = 0; c < this.#channels; c++) {
      this.#transform(spectra, earlier[c], 0, windows[c]);
      this.#transform(spectra, later[c], window - block, own[c]);
      if (weight !== 1) kernels.scale(own[c], weight, own[c].length);
    }
    spectra.fresh++;
    if (spectra.fresh === TOGETHER) this.#addFresh(spectra);
  }

  #transform({ size, x }: Spectra, row: Float64Array, from: number, out: Float64Array): void {
    const half = size / 2 + 1;
    x.fill(0, 0, from);
    x.set(row, from);
    x.fill(0, from + row.length);
    this.#kernels.realFft(x, out.subarray(0, half), out.subarray(half), size);
  }

  /** Adds what was transformed, block after block for each pair. */
  #addFresh(spectra: Spectra): void {
    const kernels = this.#kernels;
    for (const { pairs, blocks } of spectra.tiles) {
      const count = pairs[0].re.length;
      for (let i = 0; i < this.#channels; i++) {
        for (let j = 0; j < this.#channels; j++) {
          const { re, im } = pairs[i * this.#channels + j];
          for (let k = 0; k < spectra.fresh; k++) {
            const { windows, own } = blocks[k];
            kernels.spectraAdd(re, im, windows[j].re, windows[j].im, own[i].re, own[i].im, count);
          }
        }
      }
    }
    spectra.fresh = 0;
  }

  #addAllFresh(): void {
    for (const spectra of this.#spectra) this.#addFresh(spectra);
  }

  /** Takes all that is in along, or brings it back into sums of nothing. */
  carry(carrier: Carrier): void {
    this.#addAllFresh();
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
    this.#addAllFresh();
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
    this.#addAllFresh();
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
    const countsOf = new Float64Array(ROWS);
    for (let first = from; first < to; first += ROWS) {
      const some = Math.min(ROWS, to - first);
      for (let r = 0; r < some; r++) {
        const lag = start + (first + r) * stride;
        const counts = share(lag);
        sharesOf(panel, lag, shares.subarray(r * count, (r + 1) * count));
        countsOf[r] = counts;
      }
      turnRows(pairs, first, countsOf.subarray(0, some), rows);
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
    const take = (count: number) => Array.from({ length: count }, () => this.#kernels.alloc64(size + 2));
    const pairs = take(this.#channels * this.#channels);
    const blocks = Array.from({ length: TOGETHER }, () => ({
      windows: take(this.#channels),
      own: take(this.#channels),
    }));
    const x = this.#kernels.alloc64(size);
    const spectra: Spectra = { size, pairs, x, blocks, fresh: 0, tiles: tilesOf(size, pairs, blocks) };
    this.#spectra.push(spectra);
    return spectra;
  }
}

function tilesOf(size: number, pairs: readonly Float64Array[], blocks: readonly Block[]): Tile[] {
  const half = size / 2 + 1;
  return Array.from({ length: Math.ceil(half / TILE) }, (_, n) => {
    const from = n * TILE;
    const to = Math.min(half, from + TILE);
    const part = (spectrum: Float64Array): Part => ({
      re: spectrum.subarray(from, to),
      im: spectrum.subarray(half + from, half + to),
    });
    return {
      pairs: pairs.map(part),
      blocks: blocks.map(({ windows, own }) => ({ windows: windows.map(part), own: own.map(part) })),
    };
  });
}

/** Lags of all sequences turned into rows by lag, each times what it counts; a few lags at a time, as many as a cache line has. */
function turnRows(pairs: readonly Float64Array[], first: number, counts: Float64Array, rows: Float64Array): void {
  const width = pairs.length;
  for (let from = 0; from < counts.length; from += LINE) {
    const to = Math.min(from + LINE, counts.length);
    for (let n = 0; n < width; n++) {
      const pair = pairs[n];
      for (let r = from; r < to; r++) rows[r * width + n] = counts[r] * pair[first + r];
    }
  }
}
