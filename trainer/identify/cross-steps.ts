/**
 * Products of recursive features with changes some ticks apart, from one distance to the next: moved by one tick at the
 * block's two ends, then carried through the features' own recursion φ(t) = a φ(t-1) + drive Δ(t). Cross products lie
 * (nc × p), entry i·p + f for the change of channel i and feature f.
 */
import { createKernels, type Kernels } from '../kernels/kernels.ts';
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

/**
 * The same for many shifts, out[n] that of shift first + n; each to the bit what `dotShifted` gives.
 *
 * shapes  both reach over the span and all shifts; out (count)
 * units   any
 * throws  nothing
 * source  definition
 * cost    O((to - from) count), in lanes
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
  const whole = to - ((to - from) % 4);
  lanes ??= makeLanes();
  const { kernels, near, far, sums } = lanes;
  for (let n = 0; n < count; n += SHIFTS) {
    const shifts = Math.min(SHIFTS, count - n);
    sums.fill(0, 0, 4 * shifts);
    for (let start = from; start < whole; start += CHUNK) {
      const end = Math.min(whole, start + CHUNK);
      near.set(a.subarray(start, end));
      far.set(b.subarray(start + first + n, end + first + n + shifts - 1));
      kernels.shiftedDotsAdd(sums, near, far, end - start, shifts);
    }
    for (let k = 0; k < shifts; k++) {
      let sum = sums[4 * k];
      for (let t = whole; t < to; t++) sum += a[t] * b[t + first + n + k];
      out[n + k] = sum + sums[4 * k + 1] + (sums[4 * k + 2] + sums[4 * k + 3]);
    }
  }
}

/** Ticks that are taken through all shifts while they lie in the nearest cache; a multiple of four. */
const CHUNK = 1536;
/** Shifts taken together, so that their sums stay near too. */
const SHIFTS = 256;

interface Lanes {
  readonly kernels: Kernels;
  readonly near: Float64Array;
  readonly far: Float64Array;
  readonly sums: Float64Array;
}

/** Scratch of `dotsShifted`, made at its first use: nothing in it outlives a call. */
let lanes: Lanes | null = null;

function makeLanes(): Lanes {
  const kernels = createKernels(8 * (2 * CHUNK + 5 * SHIFTS) + 256);
  return {
    kernels,
    near: kernels.alloc64(CHUNK),
    far: kernels.alloc64(CHUNK + SHIFTS),
    sums: kernels.alloc64(4 * SHIFTS),
  };
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
