/**
 * Moments of ring lags, ψ_l(t) = y(t-l) - y(t), joined to those of the recursive features. A lag is a sum of changes, whose
 * products with a recursive feature follow each other backwards by that feature's recursion; products of two shifted
 * readings equally far apart differ by their two ends alone; only lags with lags are summed directly. Before the first
 * reading a channel stood still, as in the filter.
 */
import { dotShifted, dotsShifted, joinPoles, productsOfChanges, shiftBack } from './cross-steps.ts';
import type { Block, MomentInput, Moments } from './moments.ts';
import type { Poles } from './poles.ts';

/** What the lags of a bank see of the readings. */
export interface Rings {
  /** Ascending, ticks. */
  readonly lags: readonly number[];
  /** (nc) of (longest + ticks): the readings after `longest` copies of the first. */
  readonly padded: readonly Float64Array[];
  /** (nc·lags) of (ticks): ψ, entry c·lags + n. */
  readonly features: readonly Float64Array[];
}

/** A block whose recursive moments are known. `cross` is Σ φ(t-1) Δ_i(t), (nc × p). */
export interface LagBlock {
  readonly input: MomentInput;
  readonly block: Block;
  readonly poles: Poles;
  readonly changes: readonly Float64Array[];
  readonly rings: Rings;
  readonly before: Float64Array;
  readonly after: Float64Array;
  readonly cross: Float64Array;
  readonly recursive: Moments;
}

/**
 * The rings of all channels.
 *
 * shapes  values (nc) of (ticks)
 * units   standardised
 * throws  nothing
 * source  definition
 * cost    O(T nc lags)
 */
export function ringsOf(values: readonly Float64Array[], lags: readonly number[]): Rings {
  const longest = Math.max(0, ...lags);
  const padded = values.map((y) => {
    const out = new Float64Array(longest + y.length).fill(y[0], 0, longest);
    out.set(y, longest);
    return out;
  });
  const features = values.flatMap((y, c) =>
    lags.map((lag) => {
      const past = padded[c].subarray(longest - lag);
      const out = new Float64Array(y.length);
      for (let t = 0; t < y.length; t++) out[t] = past[t] - y[t];
      return out;
    }),
  );
  return { lags, padded, features };
}

/**
 * Moments of recursive features and lags together, each channel's lags after its recursive features.
 *
 * shapes  as Moments, p = nc·(F + lags)
 * units   sums over origins
 * throws  nothing
 * source  file head; checked in the tests against direct products
 * cost    O(T (nc² (longest + H) + (nc lags)²)) + O(nc p longest)
 */
export function withLags(of: LagBlock): Moments {
  const { input, block, rings, recursive, before } = of;
  const nc = input.values.length;
  const L = rings.lags.length;
  const F = before.length / nc;
  const width = input.signalCount * input.horizon;
  const p = nc * (F + L);
  const place = (c: number, f: number): number => c * (F + L) + f;
  const features = new Float64Array(p * p);
  const future = new Float64Array(p * width);
  const featureSums = new Float64Array(p);
  const pair = (row: number, col: number, value: number): void => {
    features[row * p + col] = value;
    features[col * p + row] = value;
  };
  for (let c = 0; c < nc; c++) {
    for (let f = 0; f < F; f++) {
      const from = c * F + f;
      const to = place(c, f);
      featureSums[to] = recursive.featureSums[from];
      future.set(recursive.future.subarray(from * width, (from + 1) * width), to * width);
      for (let d = 0; d < nc; d++) {
        const row = recursive.features.subarray(from * nc * F + d * F, from * nc * F + (d + 1) * F);
        features.set(row, to * p + place(d, 0));
      }
    }
  }
  putRecursiveProducts(of, features);
  rings.features.forEach((psi, a) => {
    const row = place(Math.floor(a / L), F + (a % L));
    let sum = 0;
    for (let t = block.fromIndex; t < block.toIndex; t++) sum += psi[t];
    featureSums[row] = sum;
    for (let b = 0; b <= a; b++) {
      const other = rings.features[b];
      pair(row, place(Math.floor(b / L), F + (b % L)), dotShifted(psi, other, block.fromIndex, block.toIndex, 0));
    }
  });
  putLagsAhead(of, F, future);
  return { ...recursive, features, future, featureSums };
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
