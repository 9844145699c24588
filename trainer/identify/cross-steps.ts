/**
 * Products of recursive features with changes some ticks apart, from one distance to the next: moved by one tick at the
 * block's two ends, then carried through the features' own recursion φ(t) = a φ(t-1) + drive Δ(t). Cross products lie
 * (nc × p), entry i·p + f for the change of channel i and feature f.
 */
import type { Block } from './moments.ts';
import type { Poles } from './poles.ts';

/**
 * (count × nc × nc) sums over the block's origins of Δ_c(t) Δ_i(t + k), k = 0, direction, 2 direction …; entry
 * (n·nc + c)·nc + i for the n-th k. There is no change before the first reading.
 *
 * shapes  changes (nc) of (ticks)
 * units   standardised
 * throws  nothing
 * source  definition
 * cost    O(T nc² count)
 */
export function productsOfChanges(
  changes: readonly Float64Array[],
  block: Block,
  count: number,
  direction: 1 | -1 = 1,
): Float64Array {
  const nc = changes.length;
  const out = new Float64Array(count * nc * nc);
  const { fromIndex, toIndex } = block;
  // Beyond these, shifts reach before the first reading and begin later.
  const whole = direction === 1 ? count : Math.min(count, fromIndex + 1);
  const first = direction === 1 ? 0 : 1 - whole;
  const sums = new Float64Array(whole);
  for (let c = 0; c < nc; c++) {
    for (let i = 0; i < nc; i++) {
      dotsShifted(changes[c], changes[i], fromIndex, toIndex, first, sums);
      for (let n = 0; n < whole; n++) out[(n * nc + c) * nc + i] = sums[direction * n - first];
      for (let n = whole; n < count; n++) {
        out[(n * nc + c) * nc + i] = dotShifted(changes[c], changes[i], n, toIndex, -n);
      }
    }
  }
  return out;
}

/**
 * Σ a(t) b(t + shift) over from <= t < to, in four running sums.
 *
 * shapes  both reach over the span
 * units   any
 * throws  nothing
 * source  definition
 * cost    O(to - from)
 */
export function dotShifted(a: Float64Array, b: Float64Array, from: number, to: number, shift: number): number {
  let s0 = 0;
  let s1 = 0;
  let s2 = 0;
  let s3 = 0;
  let t = from;
  for (; t + 3 < to; t += 4) {
    const u = t + shift;
    s0 += a[t] * b[u];
    s1 += a[t + 1] * b[u + 1];
    s2 += a[t + 2] * b[u + 2];
    s3 += a[t + 3] * b[u + 3];
  }
  for (; t < to; t++) s0 += a[t] * b[t + shift];
  return s0 + s1 + (s2 + s3);
}

/** Ticks that are taken through all shifts while they lie in the nearest cache; a multiple of four. */
const CHUNK = 2048;

/**
 * The same for many shifts, out[n] that of shift first + n; each to the bit what `dotShifted` gives.
 *
 * shapes  both reach over the span and all shifts; out (count)
 * units   any
 * throws  nothing
 * source  definition
 * cost    O((to - from) count), two shifts at a time
 */
export function dotsShifted(
  a: Float64Array,
  b: Float64Array,
  from: number,
  to: number,
  first: number,
  out: Float64Array,
): void {
  const count = out.length;
  const paired = count - (count % 2);
  const whole = to - ((to - from) % 4);
  const sums = new Float64Array(4 * paired);
  for (let start = from; start < whole; start += CHUNK) {
    const end = Math.min(whole, start + CHUNK);
    for (let n = 0; n < paired; n += 2) addTwoShifts(a, b, start, end, first + n, sums, 4 * n);
  }
  for (let n = 0; n < paired; n++) {
    let sum = sums[4 * n];
    for (let t = whole; t < to; t++) sum += a[t] * b[t + first + n];
    out[n] = sum + sums[4 * n + 1] + (sums[4 * n + 2] + sums[4 * n + 3]);
  }
  if (paired < count) out[paired] = dotShifted(a, b, from, to, first + paired);
}

/** Adds a whole number of fours to the running sums of a shift and of the next one. */
function addTwoShifts(
  a: Float64Array,
  b: Float64Array,
  from: number,
  to: number,
  shift: number,
  sums: Float64Array,
  at: number,
): void {
  let s0 = sums[at];
  let s1 = sums[at + 1];
  let s2 = sums[at + 2];
  let s3 = sums[at + 3];
  let r0 = sums[at + 4];
  let r1 = sums[at + 5];
  let r2 = sums[at + 6];
  let r3 = sums[at + 7];
  for (let t = from; t < to; t += 4) {
    const u = t + shift;
    const a0 = a[t];
    const a1 = a[t + 1];
    const a2 = a[t + 2];
    const a3 = a[t + 3];
    const b1 = b[u + 1];
    const b2 = b[u + 2];
    const b3 = b[u + 3];
    s0 += a0 * b[u];
    s1 += a1 * b1;
    s2 += a2 * b2;
    s3 += a3 * b3;
    r0 += a0 * b1;
    r1 += a1 * b2;
    r2 += a2 * b3;
    r3 += a3 * b[u + 4];
  }
  sums.set([s0, s1, s2, s3, r0, r1, r2, r3], at);
}

/**
 * From Σ φ(t) Δ(t+k+1) to Σ φ(t-1) Δ(t+k), both over the block's origins t; in place.
 *
 * shapes  before, after (p) features one tick before the block and at its last tick
 * units   standardised
 * throws  nothing
 * source  a sum moved by one tick changes by its two ends
 * cost    O(nc p)
 */
export function shiftBack(
  cross: Float64Array,
  changes: readonly Float64Array[],
  block: Block,
  before: Float64Array,
  after: Float64Array,
  k: number,
): void {
  const p = before.length;
  for (let i = 0; i < changes.length; i++) {
    const first = block.fromIndex + k > 0 ? changes[i][block.fromIndex + k] : 0;
    const last = block.toIndex + k > 0 ? changes[i][block.toIndex + k] : 0;
    for (let f = 0; f < p; f++) cross[i * p + f] += before[f] * first - after[f] * last;
  }
}

/**
 * From Σ φ(t-1) Δ_i(t+k) to Σ φ(t) Δ_i(t+k), in place.
 *
 * shapes  together (nc × nc) Σ Δ_c(t) Δ_i(t+k), entry c·nc + i
 * units   standardised
 * throws  nothing
 * source  the recursion of the file head
 * cost    O(nc p)
 */
export function joinPoles(poles: Poles, cross: Float64Array, channels: number, together: Float64Array): void {
  const p = cross.length / channels;
  for (let i = 0; i < channels; i++) {
    for (let c = 0; c < channels; c++) {
      const moved = together[c * channels + i];
      for (let m = 0; m < poles.count; m++) {
        const f = i * p + (c * p) / channels + poles.feature[m];
        const re = cross[f];
        if (poles.isComplex[m] === 0) {
          cross[f] = poles.poleRe[m] * re + poles.driveRe[m] * moved;
          continue;
        }
        const im = cross[f + 1];
        cross[f] = poles.poleRe[m] * re - poles.poleIm[m] * im + poles.driveRe[m] * moved;
        cross[f + 1] = poles.poleRe[m] * im + poles.poleIm[m] * re + poles.driveIm[m] * moved;
      }
    }
  }
}
