/**
 * Lagged products of many channels by blocks of a fast Fourier transform: the newest block against itself and what reaches
 * back before it, added up as spectra, and turned into lags once at the end. A block may be cut short anywhere, and the sums are
 * the same: they are linear in the newest ticks. Short stretches take short transforms.
 *
 * Overlap-save: a block of b ticks at the end of a window of n = history + b; the circular product of the two is the lagged sum
 * for every lag up to the history's length, since what wraps around lands beyond it (Oppenheim & Schafer, Discrete-Time
 * Signal Processing, section 8.7).
 */
import { fourier } from '../linalg/fourier.ts';

/** Spectra of one transform length, added up over blocks. */
interface Spectra {
  readonly size: number;
  /** (nc × nc) of (size / 2 + 1), later channel first. */
  readonly re: readonly Float64Array[];
  readonly im: readonly Float64Array[];
}

/** A transform for short stretches is this much shorter than the next longer one, so that there are few accumulators. */
const SIZE_STEP = 4;
const SHORTEST = 256;

/**
 * Length of the longest transform for a reach: a quarter of it at least is new ticks.
 *
 * shapes  none
 * units   ticks
 * throws  nothing
 * source  the work a tick is least at half; a quarter keeps the accumulators of a reach just above a power of two small
 * cost    trivial
 */
export function longestTransform(reach: number): number {
  let size = SHORTEST;
  while (3 * size < 4 * reach) size *= 2;
  return size;
}

/** Adds up lagged products Σ later_i(s) earlier_j(s - lag), lag 0..reach. */
export class LagSums {
  readonly #channels: number;
  readonly #reach: number;
  readonly #spectra: Spectra[] = [];

  constructor(channels: number, reach: number) {
    this.#channels = channels;
    this.#reach = reach;
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
    const block = later[0].length;
    const window = earlier[0].length;
    const history = window - block;
    // Every lag there is must stay clear of the negative ones that wrap around.
    const spectra = this.#spectraOf(Math.min(window - 1, this.#reach) + block);
    const { size } = spectra;
    const half = size / 2;
    const parts = later.map((last, c) => {
      const re = new Float64Array(size);
      const im = new Float64Array(size);
      re.set(last, history);
      im.set(earlier[c]);
      fourier(re, im);
      return { re, im };
    });
    // X = (Z_k + conj Z_-k) / 2 of the block, W = (Z_k - conj Z_-k) / 2i of the window.
    const channels = this.#channels;
    const xr = new Float64Array(channels);
    const xi = new Float64Array(channels);
    const wr = new Float64Array(channels);
    const wi = new Float64Array(channels);
    for (let k = 0; k <= half; k++) {
      const mirror = (size - k) & (size - 1);
      for (let c = 0; c < channels; c++) {
        const { re, im } = parts[c];
        xr[c] = 0.5 * (re[k] + re[mirror]);
        xi[c] = 0.5 * (im[k] - im[mirror]);
        wr[c] = 0.5 * (im[k] + im[mirror]);
        wi[c] = 0.5 * (re[mirror] - re[k]);
      }
      for (let i = 0; i < channels; i++) {
        for (let j = 0; j < channels; j++) {
          spectra.re[i * channels + j][k] += xr[i] * wr[j] + xi[i] * wi[j];
          spectra.im[i * channels + j][k] += xi[i] * wr[j] - xr[i] * wi[j];
        }
      }
    }
  }

  /** Scales all that is in. */
  scale(factor: number): void {
    if (factor === 1) return;
    for (const { re, im } of this.#spectra) {
      for (const sums of [...re, ...im]) for (let k = 0; k < sums.length; k++) sums[k] *= factor;
    }
  }

  /** Hands over the lags of every pair and starts again from nothing; pair i·nc + j, Σ later_i(s) earlier_j(s - lag). */
  drain(visit: (pair: number, lags: Float64Array) => void): void {
    for (const spectra of this.#spectra) {
      const { size } = spectra;
      for (let pair = 0; pair < spectra.re.length; pair++) {
        const lags = inverse(spectra.re[pair], spectra.im[pair], size);
        visit(pair, lags.subarray(0, Math.min(this.#reach + 1, size)));
      }
    }
    this.#spectra.length = 0;
  }

  #spectraOf(least: number): Spectra {
    let size = longestTransform(this.#reach);
    while (size / SIZE_STEP >= Math.max(least, SHORTEST)) size /= SIZE_STEP;
    const found = this.#spectra.find((spectra) => spectra.size === size);
    if (found !== undefined) return found;
    const make = (): Float64Array[] =>
      Array.from({ length: this.#channels * this.#channels }, () => new Float64Array(size / 2 + 1));
    const spectra = { size, re: make(), im: make() };
    this.#spectra.push(spectra);
    return spectra;
  }
}

/** Real sequence of a half spectrum. */
function inverse(halfRe: Float64Array, halfIm: Float64Array, size: number): Float64Array {
  const re = new Float64Array(size);
  const im = new Float64Array(size);
  re.set(halfRe);
  im.set(halfIm);
  for (let k = 1; k < size / 2; k++) {
    re[size - k] = re[k];
    im[size - k] = -im[k];
  }
  // The inverse is the forward transform of the conjugate, over the length.
  for (let k = 0; k < size; k++) im[k] = -im[k];
  fourier(re, im);
  for (let k = 0; k < size; k++) re[k] /= size;
  return re;
}
