/**
 * Moments where some channels were away for some of the time. Sums of two channels lack the origins at which either was away;
 * each is scaled up to all origins by the time both were there. Scaled so, pair by pair, they need not belong to any one
 * history: some mixture of features could have a negative sum of squares. So they are drawn towards sums scaled by the square
 * roots of each channel's own share, which are those of true features and cannot, no further than it takes.
 */

import type { Moments } from '../identify/moments.ts';
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';

/** Sizes of moments by channel. */
export interface ChannelLayout {
  readonly channels: number;
  readonly signalCount: number;
  /** Features a channel. */
  readonly features: number;
  readonly horizon: number;
}

/** How far to draw, in this order. */
const STEPS = [0, 1 / 8, 1 / 4, 1 / 2, 3 / 4, 1] as const;
/** Added to each feature's own sum of squares: what counts as not negative. */
const FLOOR = 1e-9;
/** Sums of two channels that were hardly ever there together are not scaled beyond this. */
const MOST_SCALE = 100;

/**
 * Scales moments for the time that channels were away, in place; untouched where none was.
 *
 * shapes  together (nc × nc) weights of the origins at which both were there; moments raw
 * units   sums over all origins
 * throws  nothing
 * source  available-case moments (Little & Rubin, Statistical Analysis with Missing Data, 2nd ed. 2002, section 3.4); the mixture
 *         with a positive semidefinite matrix as Higham, Strabić & Šego, SIAM Review 58 (2016), shrinking
 * cost    nothing where all were there; else up to five factorings of p and a solve for the future
 */
export function scaleToAll(moments: Moments, together: Float64Array, layout: ChannelLayout): void {
  const { channels } = layout;
  const { origins } = moments;
  const isAway = together.some((weight) => weight < origins * (1 - 1e-12));
  if (!isAway) return;
  const full = Float64Array.from(together, (weight) =>
    weight > 0 ? Math.min(MOST_SCALE, Math.max(1, origins / weight)) : 1,
  );
  const safe = full.map((_, at) => {
    const c = Math.floor(at / channels);
    const d = at % channels;
    return Math.sqrt(full[c * channels + c] * full[d * channels + d]);
  });
  for (const step of STEPS) {
    const scales = full.map((value, at) => (1 - step) * value + step * safe[at]);
    const scaled = scaledBy(moments, scales, layout);
    if (step < 1 && !isNonNegative(scaled, layout)) continue;
    moments.features.set(scaled.features);
    moments.future.set(scaled.future);
    moments.energy.set(scaled.energy);
    moments.featureSums.set(scaled.featureSums);
    moments.futureSums.set(scaled.futureSums);
    return;
  }
}

function scaledBy(moments: Moments, scales: Float64Array, layout: ChannelLayout): Moments {
  const { channels, features, horizon, signalCount } = layout;
  const p = channels * features;
  const width = signalCount * horizon;
  const own = (c: number): number => scales[c * channels + c];
  return {
    origins: moments.origins,
    features: moments.features.map((value, at) => {
      const c = Math.floor(Math.floor(at / p) / features);
      return value * scales[c * channels + Math.floor((at % p) / features)];
    }),
    future: moments.future.map((value, at) => {
      const c = Math.floor(Math.floor(at / width) / features);
      return value * scales[c * channels + Math.floor((at % width) / horizon)];
    }),
    energy: moments.energy.map((value, k) => value * own(Math.floor(k / horizon))),
    featureSums: moments.featureSums.map((value, f) => value * own(Math.floor(f / features))),
    futureSums: moments.futureSums.map((value, k) => value * own(Math.floor(k / horizon))),
  };
}

/**
 * Whether no mixture of features, and none of them with a step of the future, has a negative sum of squares.
 *
 * shapes  as Moments
 * units   any
 * throws  nothing
 * source  a factor exists; the future's rest after the features (Schur complement) is not negative
 * cost    O(p³ + p² ny H)
 */
export function isNonNegative(moments: Moments, { channels, features }: ChannelLayout): boolean {
  const p = channels * features;
  const gram = moments.features.slice();
  for (let f = 0; f < p; f++) {
    // A feature that never moved has nothing to be weighed against.
    if (gram[f * p + f] <= 0) gram[f * p + f] = 1;
    gram[f * p + f] *= 1 + FLOOR;
  }
  const width = moments.energy.length;
  const map = moments.future.slice();
  try {
    solveCholesky(cholesky(gram, p), p, map, width);
  } catch {
    return false;
  }
  for (let k = 0; k < width; k++) {
    let told = 0;
    for (let f = 0; f < p; f++) told += map[f * width + k] * moments.future[f * width + k];
    if (told > moments.energy[k] * (1 + FLOOR)) return false;
  }
  return true;
}
