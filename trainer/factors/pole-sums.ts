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

/** What a change of one, as many ticks ago as a place says, leaves in each feature some ticks before the last. */
export interface Memory {
  /** (perChannel × places), nothing where a place is newer than that or the memory has let go. */
  readonly shares: Float64Array;
  /** (perChannel) first place from which on there is nothing. */
  readonly until: Int32Array;
}

/** Below this share of a change nothing of it is left. */
const LEAST_SHARE = 1e-20;

/**
 * The features' memories, `shift` ticks before the last.
 *
 * shapes  as Memory
 * units   raw
 * throws  nothing
 * source  powers of a pole
 * cost    O(features places)
 */
export function memories({ poles, perChannel }: PoleShape, grid: LagGrid, shift: number): Memory {
  const places = grid.lags.length;
  const shares = new Float64Array(perChannel * places);
  const until = new Int32Array(perChannel);
  for (let m = 0; m < poles.count; m++) {
    if (m === poles.level) continue;
    const decay = Math.log(Math.hypot(poles.poleRe[m], poles.poleIm[m]));
    const angle = Math.atan2(poles.poleIm[m], poles.poleRe[m]);
    const furthest = shift + Math.log(LEAST_SHARE) / decay;
    const end = placesUpTo(grid, furthest);
    const f = poles.feature[m];
    until[f] = end;
    if (poles.isComplex[m] === 1) until[f + 1] = end;
    const at = f * places;
    for (let q = Math.min(shift, grid.dense); q < end; q++) {
      const age = grid.lags[q] - shift;
      const size = Math.exp(decay * age);
      if (poles.isComplex[m] === 0) {
        shares[at + q] = size * poles.driveRe[m];
        continue;
      }
      const re = size * Math.cos(angle * age);
      const im = size * Math.sin(angle * age);
      shares[at + q] = re * poles.driveRe[m] - im * poles.driveIm[m];
      shares[at + places + q] = re * poles.driveIm[m] + im * poles.driveRe[m];
    }
  }
  return { shares, until };
}

/** Places of the lags up to one: whole panels. */
function placesUpTo(grid: LagGrid, lag: number): number {
  if (lag < grid.dense) return Math.max(0, Math.ceil(lag));
  const beyond = grid.panels.find(({ from }) => from > lag);
  return beyond?.place ?? grid.lags.length;
}

/**
 * (rows × perChannel) each row of sums by place against each feature's memory.
 *
 * shapes  sums (rows × places)
 * units   raw
 * throws  nothing
 * source  definition
 * cost    O(rows features places)
 */
export function remember(sums: Float64Array, { shares, until }: Memory, places: number): Float64Array {
  const rows = sums.length / places;
  const features = until.length;
  const out = new Float64Array(rows * features);
  for (let r = 0; r < rows; r++) {
    const row = sums.subarray(r * places, (r + 1) * places);
    for (let f = 0; f < features; f++) {
      out[r * features + f] = dotOf(row, shares, f * places, until[f]);
    }
  }
  return out;
}

function dotOf(a: Float64Array, b: Float64Array, from: number, length: number): number {
  let s0 = 0;
  let s1 = 0;
  let s2 = 0;
  let s3 = 0;
  let q = 0;
  for (; q + 3 < length; q += 4) {
    s0 += a[q] * b[from + q];
    s1 += a[q + 1] * b[from + q + 1];
    s2 += a[q + 2] * b[from + q + 2];
    s3 += a[q + 3] * b[from + q + 3];
  }
  for (; q < length; q++) s0 += a[q] * b[from + q];
  return s0 + s1 + (s2 + s3);
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
