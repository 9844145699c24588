/**
 * Products of the features among themselves, from their products with the next change: each pair of poles a, b solves one
 * scalar Stein equation, Σ φ_a φ_b (1 - a b) = the rest, so no pass over the readings is needed. Both Σ φ_a φ_b and
 * Σ φ_a conj(φ_b) are solved for, which together give the four products of real and imaginary parts.
 */
import type { Poles } from './poles.ts';

/**
 * Σ φ(t) φ(t)' over a block's origins.
 *
 * shapes  before, after (p) features one tick before the block and at its last tick; cross (nc × p), entry i·p + f the
 *         sum of feature f at t-1 times the change of channel i at t; changes (nc × nc) sums of changes times changes;
 *         levels (nc × nc) sums of readings times readings, used where the bank has a level; out symmetric, (nc·each), where
 *         each channel's features come first
 * units   standardised; sums
 * throws  nothing
 * source  Byrnes, Georgiou & Lindquist (2000), section II, with the two ends of a finite block added
 * cost    O(p²)
 */
export function featureProducts(
  poles: Poles,
  channels: number,
  before: Float64Array,
  after: Float64Array,
  cross: Float64Array,
  changes: Float64Array,
  levels: Float64Array,
  each: number,
  out: Float64Array,
): void {
  const width = channels * each;
  const pair = new PairSolver(poles, channels, before, after, cross, changes, each);
  for (let i = 0; i < channels; i++) {
    for (let a = 0; a < poles.count; a++) {
      for (let j = 0; j <= i; j++) {
        const last = j === i ? a : poles.count - 1;
        for (let b = 0; b <= last; b++) {
          if (a !== poles.level || b !== poles.level) pair.solve(i, a, j, b, out);
          else write(out, width, pair.place(i, a), pair.place(j, b), levels[i * channels + j]);
        }
      }
    }
  }
}

class PairSolver {
  readonly #poles: Poles;
  readonly #channels: number;
  readonly #before: Float64Array;
  readonly #after: Float64Array;
  readonly #cross: Float64Array;
  readonly #changes: Float64Array;
  /** Rows of the result a channel. */
  readonly #each: number;
  /** Real and imaginary part of the sum last solved for. */
  #re = 0;
  #im = 0;

  constructor(
    poles: Poles,
    channels: number,
    before: Float64Array,
    after: Float64Array,
    cross: Float64Array,
    changes: Float64Array,
    each: number,
  ) {
    this.#poles = poles;
    this.#channels = channels;
    this.#before = before;
    this.#after = after;
    this.#cross = cross;
    this.#changes = changes;
    this.#each = each;
  }

  /** Row of the first feature of a channel's mode. */
  place(channel: number, mode: number): number {
    return channel * this.#each + this.#poles.feature[mode];
  }

  /** Index of the same in what is given. */
  #index(channel: number, mode: number): number {
    return (channel * this.#before.length) / this.#channels + this.#poles.feature[mode];
  }

  /** Writes the products of mode a of channel i with mode b of channel j, on both sides of the diagonal. */
  solve(i: number, a: number, j: number, b: number, out: Float64Array): void {
    const { isComplex } = this.#poles;
    const p = this.#channels * this.#each;
    const f = this.place(i, a);
    const g = this.place(j, b);
    this.#sum(i, a, j, b, 1);
    const plainRe = this.#re;
    const plainIm = this.#im;
    if (isComplex[a] === 0 && isComplex[b] === 0) {
      write(out, p, f, g, plainRe);
      return;
    }
    this.#sum(i, a, j, b, -1);
    write(out, p, f, g, 0.5 * (plainRe + this.#re));
    if (isComplex[b] === 1) write(out, p, f, g + 1, 0.5 * (plainIm - this.#im));
    if (isComplex[a] === 1) write(out, p, f + 1, g, 0.5 * (plainIm + this.#im));
    if (isComplex[a] === 1 && isComplex[b] === 1) write(out, p, f + 1, g + 1, 0.5 * (this.#re - plainRe));
  }

  /** Σ φ_a φ_b for sign 1, Σ φ_a conj(φ_b) for sign -1, left in #re and #im. */
  #sum(i: number, a: number, j: number, b: number, sign: number): void {
    const { poleRe, poleIm, driveRe, driveIm, isComplex } = this.#poles;
    const p = this.#before.length;
    const f = this.#index(i, a);
    const g = this.#index(j, b);
    const aRe = poleRe[a];
    const aIm = poleIm[a];
    const bRe = poleRe[b];
    const bIm = sign * poleIm[b];
    const uRe = driveRe[a];
    const uIm = driveIm[a];
    const vRe = driveRe[b];
    const vIm = sign * driveIm[b];
    const before = this.#before;
    const after = this.#after;
    const cross = this.#cross;
    const hasIm = isComplex[a] === 1;
    const hasOtherIm = isComplex[b] === 1;
    // Spelled out: this is gone through for every pair of features, and small arrays made here would be half of a fit's.
    const x0Im = hasIm ? before[f + 1] : 0;
    const y0Im = sign * (hasOtherIm ? before[g + 1] : 0);
    const e0Re = before[f] * before[g] - x0Im * y0Im;
    const e0Im = before[f] * y0Im + x0Im * before[g];
    const x1Im = hasIm ? after[f + 1] : 0;
    const y1Im = sign * (hasOtherIm ? after[g + 1] : 0);
    const e1Re = after[f] * after[g] - x1Im * y1Im;
    const e1Im = after[f] * y1Im + x1Im * after[g];
    const abRe = aRe * bRe - aIm * bIm;
    const abIm = aRe * bIm + aIm * bRe;
    const eRe = e0Re - e1Re;
    const eIm = e0Im - e1Im;
    // a v N(a, j) + b u N(b, i) + u v D(i, j)
    const nRe = cross[j * p + f];
    const nIm = hasIm ? cross[j * p + f + 1] : 0;
    const mRe = cross[i * p + g];
    const mIm = sign * (hasOtherIm ? cross[i * p + g + 1] : 0);
    const avRe = aRe * vRe - aIm * vIm;
    const avIm = aRe * vIm + aIm * vRe;
    const buRe = bRe * uRe - bIm * uIm;
    const buIm = bRe * uIm + bIm * uRe;
    const d = this.#changes[i * this.#channels + j];
    const re =
      abRe * eRe - abIm * eIm + avRe * nRe - avIm * nIm + buRe * mRe - buIm * mIm + (uRe * vRe - uIm * vIm) * d;
    const im =
      abRe * eIm + abIm * eRe + avRe * nIm + avIm * nRe + buRe * mIm + buIm * mRe + (uRe * vIm + uIm * vRe) * d;
    const wRe = 1 - abRe;
    const size = wRe * wRe + abIm * abIm;
    this.#re = (re * wRe - im * abIm) / size;
    this.#im = (im * wRe + re * abIm) / size;
  }
}

function write(out: Float64Array, p: number, row: number, col: number, value: number): void {
  out[row * p + col] = value;
  out[col * p + row] = value;
}
