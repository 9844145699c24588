/**
 * Moments of ring lags, ψ_l(t) = y(t-l) - y(t), joined to those of the recursive features. A lag is a sum of changes, whose
 * products with a recursive feature follow each other backwards by that feature's recursion; products of two shifted
 * readings equally far apart differ by their two ends alone; only lags with lags are summed directly. Before the first
 * reading a channel stood still, as in the filter.
 */
import { createKernels, type Kernels } from '../kernels/kernels.ts';
import { dotsShifted, joinPoles, productsOfChanges, shiftBack } from './cross-steps.ts';
import type { Block, MomentInput, Moments } from './moments.ts';
import type { Poles } from './poles.ts';

/** What the lags of a bank see of the readings. */
export interface Rings {
  /** Ascending, ticks. */
  readonly lags: readonly number[];
  /** (nc) of (longest + ticks): the readings after `longest` copies of the first. */
  readonly padded: readonly Float64Array[];
}

/** A block, the features one tick before it and at its last tick, and what is known of it. `cross` is Σ φ(t-1) Δ_i(t), (nc × p). */
export interface LagBlock {
  readonly input: MomentInput;
  readonly block: Block;
  readonly poles: Poles;
  readonly changes: readonly Float64Array[];
  readonly rings: Rings;
  readonly before: Float64Array;
  readonly after: Float64Array;
  readonly cross: Float64Array;
}

/**
 * The rings of all channels.
 *
 * shapes  values (nc) of (ticks)
 * units   standardised
 * throws  nothing
 * source  definition
 * cost    O(T nc)
 */
export function ringsOf(values: readonly Float64Array[], lags: readonly number[]): Rings {
  const longest = Math.max(0, ...lags);
  const padded = values.map((y) => {
    const out = new Float64Array(longest + y.length).fill(y[0], 0, longest);
    out.set(y, longest);
    return out;
  });
  return { lags, padded };
}

/**
 * Writes the moments of a block's lags, each channel's after its recursive features.
 *
 * shapes  into as Moments, p = nc·(F + lags)
 * units   sums over origins
 * throws  nothing
 * source  file head; checked in the tests against direct products
 * cost    O(T (nc² (longest + H) + (nc lags)²)) + O(nc p longest)
 */
export function putLags(of: LagBlock, into: Pick<Moments, 'features' | 'future' | 'featureSums'>): void {
  putRecursiveProducts(of, into.features);
  putLagProducts(of, into.features, into.featureSums);
  putLagsAhead(of, of.before.length / of.changes.length, into.future);
}

/** Ticks of all lags that lie in the nearer caches together; a multiple of four. */
const CHUNK = 384;

/** Σ ψ_l ψ_m of all lags of all channels, on both sides of the diagonal, and Σ ψ_l. */
function putLagProducts({ rings, block, before }: LagBlock, features: Float64Array, featureSums: Float64Array): void {
  const { lags, padded } = rings;
  const nc = padded.length;
  const L = lags.length;
  const rows = nc * L;
  const p = featureSums.length;
  const place = Int32Array.from({ length: rows }, (_, a) => {
    return (Math.floor(a / L) * p + before.length) / nc + (a % L);
  });
  const { kernels, psi, sums } = productsFor(rows);
  sums.fill(0, 0, 2 * rows * (rows + 1));
  for (const row of place) featureSums[row] = 0;
  let ticks = 0;
  for (let start = block.fromIndex; start < block.toIndex; start += CHUNK) {
    ticks = Math.min(CHUNK, block.toIndex - start);
    for (let a = 0; a < rows; a++) {
      featureSums[place[a]] = writeLag(
        padded[Math.floor(a / L)],
        lags,
        a % L,
        start,
        ticks,
        psi,
        a * CHUNK,
        featureSums[place[a]],
      );
    }
    kernels.pairedDotsAdd(sums, psi, CHUNK, rows, ticks - (ticks % 4));
  }
  for (let a = 0, at = 0; a < rows; a++) {
    for (let b = 0; b <= a; b++, at += 4) {
      let sum = sums[at];
      for (let t = ticks - (ticks % 4); t < ticks; t++) sum += psi[a * CHUNK + t] * psi[b * CHUNK + t];
      sum = sum + sums[at + 1] + (sums[at + 2] + sums[at + 3]);
      features[place[a] * p + place[b]] = sum;
      features[place[b] * p + place[a]] = sum;
    }
  }
}

/** Writes a lag's feature over some ticks and adds them to a sum. */
function writeLag(
  padded: Float64Array,
  lags: readonly number[],
  n: number,
  start: number,
  ticks: number,
  out: Float64Array,
  to: number,
  before: number,
): number {
  const now = start + lags[lags.length - 1];
  const past = now - lags[n];
  let sum = before;
  for (let t = 0; t < ticks; t++) {
    const psi = padded[past + t] - padded[now + t];
    out[to + t] = psi;
    sum += psi;
  }
  return sum;
}

interface Products {
  readonly rows: number;
  readonly kernels: Kernels;
  readonly psi: Float64Array;
  readonly sums: Float64Array;
}

/** Scratch, made anew where more lags come: nothing in it outlives a call. */
let held: Products | null = null;

function productsFor(rows: number): Products {
  if (held !== null && held.rows >= rows) return held;
  const pairs = (rows * (rows + 1)) / 2;
  const kernels = createKernels(8 * (rows * CHUNK + 4 * pairs) + 256);
  held = { rows, kernels, psi: kernels.alloc64(rows * CHUNK), sums: kernels.alloc64(4 * pairs) };
  return held;
}

/**
 * Σ ψ_l of channel d times every recursive feature f of channel c, into `features` on both sides of the diagonal: minus the
 * sum of its products with l changes.
 */
function putRecursiveProducts(
  { block, poles, changes, rings, before, after, cross }: LagBlock,
  features: Float64Array,
): void {
  const nc = changes.length;
  const p = before.length;
  const F = p / nc;
  const each = F + rings.lags.length;
  const longest = rings.lags[rings.lags.length - 1];
  const together = productsOfChanges(changes, block, longest, -1);
  const moved = cross.slice();
  const sums = new Float64Array(moved.length);
  for (let back = 0; back < longest; back++) {
    if (back > 0) shiftBack(moved, changes, block, before, after, -back);
    joinPoles(poles, moved, nc, together.subarray(back * nc * nc, (back + 1) * nc * nc));
    for (let at = 0; at < sums.length; at++) sums[at] -= moved[at];
    const n = rings.lags.indexOf(back + 1);
    if (n < 0) continue;
    for (let d = 0; d < nc; d++) {
      const row = d * each + F + n;
      for (let c = 0, at = d * p; c < nc; c++) {
        for (let col = c * each; col < c * each + F; col++, at++) {
          features[row * nc * each + col] = sums[at];
          features[col * nc * each + row] = sums[at];
        }
      }
    }
  }
}

/**
 * Σ ψ_l of channel c times y_i(t+h) - y_i(t), into the rows of `future` after F others of each channel: by products of readings
 * shifted by l and h, one distance l + h at a time.
 */
function putLagsAhead({ input, block, rings }: LagBlock, F: number, future: Float64Array): void {
  const { signalCount, horizon: H } = input;
  const { lags, padded } = rings;
  const longest = lags[lags.length - 1];
  const from = block.fromIndex + longest;
  const to = block.toIndex + longest;
  // Entry l·(H + 1) + h: Σ y_c(t - l) y_i(t + h).
  const shifted = new Float64Array((longest + 1) * (H + 1));
  const near = new Float64Array(H + 1);
  const far = new Float64Array(longest);
  for (let c = 0; c < padded.length; c++) {
    for (let i = 0; i < signalCount; i++) {
      const past = padded[c];
      const ahead = padded[i];
      dotsShifted(past, ahead, from, to, 0, near);
      // Σ y_c(t - l) y_i(t + H) for l = longest … 1, taken from the later end.
      dotsShifted(ahead, past, from + H, to + H, -longest - H, far);
      for (let apart = 0; apart <= longest + H; apart++) {
        const nearest = Math.max(0, apart - H);
        let sum = nearest === 0 ? near[apart] : far[longest - nearest];
        shifted[nearest * (H + 1) + apart - nearest] = sum;
        for (let l = nearest + 1; l <= Math.min(longest, apart); l++) {
          const h = apart - l;
          sum += past[from - l] * ahead[from + h] - past[to - l] * ahead[to + h];
          shifted[l * (H + 1) + h] = sum;
        }
      }
      lags.forEach((l, n) => {
        const row = l * (H + 1);
        const to = ((c * (F + lags.length) + F + n) * signalCount + i) * H - 1;
        for (let h = 1; h <= H; h++) future[to + h] = shifted[row + h] - shifted[row] - shifted[h] + shifted[0];
      });
    }
  }
}
