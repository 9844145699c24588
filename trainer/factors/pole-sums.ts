/**
 * Products of the recursive features with changes and with each other, from the lagged sums alone. A feature is a sum over
 * past changes weighted by its pole's powers, so its product with the change k ticks on is a sum of lagged products weighted
 * by them: taken once at the furthest step, where a run's end cuts nothing off, then nearer step by step by the feature's own
 * recursion φ(t) = a φ(t-1) + drive D(t), less what each run's end takes away. Products of features solve a scalar Stein
 * equation each, as in identify/stein.ts, here with the ends of many runs and weights that grow by β a tick.
 */
import type { Poles } from '../identify/poles.ts';
import type { LagGrid } from './lag-grid.ts';

/** The recursive features of all channels: index c · perChannel + poles.feature[mode], the level left out. */
export interface PoleShape {
  readonly poles: Poles;
  readonly channels: number;
  /** Features of a channel that are recursions, the level not among them. */
  readonly perChannel: number;
  readonly growth: number;
}

/**
 * (perChannel × places) what a change of one, as many ticks ago as a place says, leaves in each feature `shift` ticks before the
 * last; nothing where the place is newer than that.
 *
 * shapes  as said
 * units   raw
 * throws  nothing
 * source  powers of a pole
 * cost    O(features places)
 */
export function memories({ poles, perChannel }: PoleShape, grid: LagGrid, shift: number): Float64Array {
  const places = grid.lags.length;
  const out = new Float64Array(perChannel * places);
  for (let m = 0; m < poles.count; m++) {
    if (m === poles.level) continue;
    const radius = Math.hypot(poles.poleRe[m], poles.poleIm[m]);
    const angle = Math.atan2(poles.poleIm[m], poles.poleRe[m]);
    const at = poles.feature[m] * places;
    for (let q = 0; q < places; q++) {
      const age = grid.lags[q] - shift;
      if (age < 0) continue;
      const size = radius ** age;
      const re = size * Math.cos(angle * age);
      const im = size * Math.sin(angle * age);
      out[at + q] = re * poles.driveRe[m] - im * poles.driveIm[m];
      if (poles.isComplex[m] === 1) out[at + places + q] = re * poles.driveIm[m] + im * poles.driveRe[m];
    }
  }
  return out;
}

/**
 * (rows × perChannel) each row of sums by place against each feature's memory.
 *
 * shapes  sums (rows × places), memory (perChannel × places)
 * units   raw
 * throws  nothing
 * source  definition
 * cost    O(rows features places)
 */
export function remember(sums: Float64Array, memory: Float64Array, places: number): Float64Array {
  const rows = sums.length / places;
  const features = memory.length / places;
  const out = new Float64Array(rows * features);
  for (let r = 0; r < rows; r++) {
    for (let f = 0; f < features; f++) {
      let even = 0;
      let odd = 0;
      const a = r * places;
      const b = f * places;
      let q = 0;
      for (; q + 1 < places; q += 2) {
        even += sums[a + q] * memory[b + q];
        odd += sums[a + q + 1] * memory[b + q + 1];
      }
      if (q < places) even += sums[a + q] * memory[b + q];
      out[r * features + f] = even + odd;
    }
  }
  return out;
}

/**
 * out_f += factor · (a_f φ_f + drive_f moved), for all features of one channel.
 *
 * shapes  phi, out (perChannel) from their offsets on
 * units   raw
 * throws  nothing
 * source  the recursion of the file head
 * cost    O(features)
 */
export function turn(
  { poles }: PoleShape,
  phi: Float64Array,
  from: number,
  growth: number,
  moved: number,
  out: Float64Array,
  to: number,
): void {
  for (let m = 0; m < poles.count; m++) {
    if (m === poles.level) continue;
    const f = poles.feature[m];
    const re = growth * phi[from + f];
    if (poles.isComplex[m] === 0) {
      out[to + f] = poles.poleRe[m] * re + poles.driveRe[m] * moved;
      continue;
    }
    const im = growth * phi[from + f + 1];
    out[to + f] = poles.poleRe[m] * re - poles.poleIm[m] * im + poles.driveRe[m] * moved;
    out[to + f + 1] = poles.poleRe[m] * im + poles.poleIm[m] * re + poles.driveIm[m] * moved;
  }
}

/** What the Stein equations are solved from. */
export interface SteinSums {
  /** (nc × p) Σ w(t) φ_f(t-1) D_i(t), entry i·p + f. */
  readonly before: Float64Array;
  /** (nc × nc) Σ w(t) D_i(t) D_j(t). */
  readonly together: Float64Array;
  /** (p × p) Σ over runs of w(T) φ(T) φ(T)'. */
  readonly ends: Float64Array;
}

/**
 * (p × p) Σ w(t) φ(t) φ(t)' over the origins, by pairs of modes a, b:
 * (1 - a b β) Σ φ_a φ_b = -a b β (ends) + a v Σ φ_a(t-1) D_j + b u Σ φ_b(t-1) D_i + u v Σ D_i D_j.
 *
 * shapes  p = nc · perChannel
 * units   raw
 * throws  nothing
 * source  Byrnes, Georgiou & Lindquist, IEEE Trans. Signal Processing 48 (2000), section II, with ends and weights added
 * cost    O(p²)
 */
export function productsOfPoles(shape: PoleShape, sums: SteinSums): Float64Array {
  const { poles, channels, perChannel } = shape;
  const p = channels * perChannel;
  const out = new Float64Array(p * p);
  const sum = new Float64Array(4);
  for (let i = 0; i < channels; i++) {
    for (let a = 0; a < poles.count; a++) {
      if (a === poles.level) continue;
      const f = i * perChannel + poles.feature[a];
      for (let j = 0; j <= i; j++) {
        const last = j === i ? a : poles.count - 1;
        for (let b = 0; b <= last; b++) {
          if (b === poles.level) continue;
          const g = j * perChannel + poles.feature[b];
          solvePair(shape, sums, p, i, a, f, j, b, g, sum);
          const both = 2 * poles.isComplex[a] + poles.isComplex[b];
          write(out, p, f, g, sum[0]);
          if (both % 2 === 1) write(out, p, f, g + 1, sum[1]);
          if (both >= 2) write(out, p, f + 1, g, sum[2]);
          if (both === 3) write(out, p, f + 1, g + 1, sum[3]);
        }
      }
    }
  }
  return out;
}

/** Leaves the sums of re re, re im, im re and im im in `sum`. */
function solvePair(
  { poles, channels, growth }: PoleShape,
  { before, together, ends }: SteinSums,
  p: number,
  i: number,
  a: number,
  f: number,
  j: number,
  b: number,
  g: number,
  sum: Float64Array,
): void {
  const { poleRe, poleIm, driveRe, driveIm, isComplex } = poles;
  const isA = isComplex[a];
  const isB = isComplex[b];
  const nRe = before[j * p + f];
  const nIm = isA ? before[j * p + f + 1] : 0;
  const mRe = before[i * p + g];
  const mIm0 = isB ? before[i * p + g + 1] : 0;
  const rr = ends[f * p + g];
  const ri = isB ? ends[f * p + g + 1] : 0;
  const ir = isA ? ends[(f + 1) * p + g] : 0;
  const ii = isA && isB ? ends[(f + 1) * p + g + 1] : 0;
  const d = together[i * channels + j];
  const aRe = poleRe[a];
  const aIm = poleIm[a];
  const uRe = driveRe[a];
  const uIm = driveIm[a];
  const isReal = !isA && !isB;
  let plainRe = 0;
  let plainIm = 0;
  for (let sign = 1; sign >= -1; sign -= 2) {
    const bRe = poleRe[b];
    const bIm = sign * poleIm[b];
    const vRe = driveRe[b];
    const vIm = sign * driveIm[b];
    const mIm = sign * mIm0;
    const eRe = -growth * (rr - sign * ii);
    const eIm = -growth * (sign * ri + ir);
    const abRe = aRe * bRe - aIm * bIm;
    const abIm = aRe * bIm + aIm * bRe;
    const avRe = aRe * vRe - aIm * vIm;
    const avIm = aRe * vIm + aIm * vRe;
    const buRe = bRe * uRe - bIm * uIm;
    const buIm = bRe * uIm + bIm * uRe;
    const re =
      abRe * eRe - abIm * eIm + avRe * nRe - avIm * nIm + buRe * mRe - buIm * mIm + (uRe * vRe - uIm * vIm) * d;
    const im =
      abRe * eIm + abIm * eRe + avRe * nIm + avIm * nRe + buRe * mIm + buIm * mRe + (uRe * vIm + uIm * vRe) * d;
    const wRe = 1 - growth * abRe;
    const wIm = growth * abIm;
    const size = wRe * wRe + wIm * wIm;
    const sRe = (re * wRe - im * wIm) / size;
    const sIm = (im * wRe + re * wIm) / size;
    if (isReal) {
      sum[0] = sRe;
      return;
    }
    if (sign === 1) {
      plainRe = sRe;
      plainIm = sIm;
      continue;
    }
    sum[0] = 0.5 * (plainRe + sRe);
    sum[1] = 0.5 * (plainIm - sIm);
    sum[2] = 0.5 * (plainIm + sIm);
    sum[3] = 0.5 * (sRe - plainRe);
  }
}

function write(out: Float64Array, p: number, row: number, col: number, value: number): void {
  out[row * p + col] = value;
  out[col * p + row] = value;
}
