/**
 * Features carried over a block of ticks, and their products with the changes one horizon ahead: the one pass over the
 * readings that moments need. In lanes across features and channels, every sum in the order of time.
 */
import { createKernels, type Kernels } from '../kernels/kernels.ts';
import type { Poles } from './poles.ts';

/** Ticks whose features lie in the nearer caches together. */
const STEPS = 32;

/**
 * Moves all features over the ticks from <= t < to, as `advancePoles` does tick by tick.
 *
 * shapes  phi (nc·F), moved in place; changes (nc) of (ticks); result (nc × p), entry i·p + f: Σ φ_f(t) Δ_i(t + horizon)
 * units   standardised; sums
 * throws  nothing
 * source  recursion of poles.ts
 * cost    O((to - from) nc p)
 */
export function carryBlock(
  poles: Poles,
  phi: Float64Array,
  changes: readonly Float64Array[],
  from: number,
  to: number,
  horizon: number,
): Float64Array {
  const p = phi.length;
  const nc = changes.length;
  const work = workFor(p, nc);
  const { kernels } = work;
  const mark = kernels.mark();
  const m = fours(nc);
  const n = fours(p);
  const sums = kernels.alloc64(m * n);
  const rows = kernels.alloc64(STEPS * n);
  const last = kernels.alloc64(n);
  const own = kernels.alloc64(nc * STEPS);
  const ahead = kernels.alloc64(STEPS * m);
  const factors = factorsOf(kernels, poles, p / nc);
  last.set(phi);
  // Views made once: made anew for every few ticks they would take as long as the features.
  const lanes = changes.map((_, c) => lanesOf(poles, factors, (c * p) / nc, rows, last, own.subarray(c * STEPS)));
  for (let start = from; start < to; start += STEPS) {
    const steps = Math.min(STEPS, to - start);
    for (let c = 0; c < nc; c++) {
      const change = changes[c];
      for (let t = 0; t < steps; t++) {
        own[c * STEPS + t] = change[start + t];
        ahead[t * m + c] = change[start + t + horizon];
      }
      for (const { rows, last, factors, real, n: count, changes } of lanes[c]) {
        kernels.carryForward(rows, n, last, factors, real, count, changes, steps);
      }
    }
    kernels.orderedProductAdd(sums, ahead, rows, steps, m, n);
    last.set(rows.subarray((steps - 1) * n, steps * n));
  }
  phi.set(last.subarray(0, p));
  const out = new Float64Array(nc * p);
  for (let i = 0; i < nc; i++) out.set(sums.subarray(i * n, i * n + p), i * p);
  kernels.release(mark);
  return out;
}

interface Factors {
  readonly re: Float64Array;
  readonly im: Float64Array;
  readonly own: Float64Array;
}

/** Means first, then resonators as pairs, then the level, as the bank lays a channel's features. */
function factorsOf(kernels: Kernels, poles: Poles, perChannel: number): Factors {
  const re = kernels.alloc64(perChannel);
  const im = kernels.alloc64(perChannel);
  const own = kernels.alloc64(perChannel);
  for (let m = 0; m < poles.count; m++) {
    const f = poles.feature[m];
    re[f] = poles.poleRe[m];
    own[f] = poles.driveRe[m];
    if (poles.isComplex[m] === 0) continue;
    re[f + 1] = poles.poleRe[m];
    im[f] = -poles.poleIm[m];
    im[f + 1] = poles.poleIm[m];
    own[f + 1] = poles.driveIm[m];
  }
  return { re, im, own };
}

/** Features of a channel that are carried together, as the kernels take them. */
interface Lane {
  readonly rows: Float64Array;
  readonly last: Float64Array;
  readonly factors: Factors;
  readonly real: number;
  readonly n: number;
  readonly changes: Float64Array;
}

/** A channel's means and resonators, and its level where the bank has one, from feature `at` on. */
function lanesOf(
  poles: Poles,
  factors: Factors,
  at: number,
  rows: Float64Array,
  last: Float64Array,
  changes: Float64Array,
): Lane[] {
  const n = factors.re.length - (poles.level >= 0 ? 1 : 0);
  const pairs = poles.isComplex.reduce((sum, one) => sum + one, 0);
  const paired = { rows: rows.subarray(at), last: last.subarray(at), factors, real: n - 2 * pairs, n, changes };
  if (poles.level < 0) return [paired];
  const { re, im, own } = factors;
  const level = { re: re.subarray(n), im: im.subarray(n), own: own.subarray(n) };
  return [paired, { rows: rows.subarray(at + n), last: last.subarray(at + n), factors: level, real: 1, n: 1, changes }];
}

function fours(n: number): number {
  return 4 * Math.ceil(n / 4);
}

interface Work {
  readonly bytes: number;
  readonly kernels: Kernels;
}

/** Scratch, made anew where a larger bank comes: nothing in it outlives a call. */
let held: Work | null = null;

function workFor(p: number, nc: number): Work {
  const n = fours(p);
  const m = fours(nc);
  const bytes = 8 * (m * n + (STEPS + 1) * n + STEPS * (nc + m) + (3 * p) / nc) + 1024;
  if (held === null || held.bytes < bytes) held = { bytes, kernels: createKernels(bytes) };
  return held;
}
