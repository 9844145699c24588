/**
 * The map from features to the future by ridge regression in two stages, from second moments alone: each signal from its
 * own past and the known inputs, then what that left from the past of all channels under a heavier penalty. The penalty
 * is relative to each feature's own variance, so units and scalings do not matter. Stage two is shared work for all
 * signals; a signal may be left out of it.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { multiply } from '../linalg/products.ts';
import type { Moments } from './moments.ts';

/** Sizes of a set of moments. */
export interface Layout {
  readonly channelCount: number;
  readonly signalCount: number;
  /** Features a channel. */
  readonly featureCount: number;
  /** Future steps a signal. */
  readonly steps: number;
}

/** A diagonal entry below this share of the largest counts as this share, so that a silent feature is held at zero. */
const SILENT_SHARE = 1e-12;

/**
 * Features a signal's own stage may use: its own and those of the inputs.
 *
 * shapes  result ascending indices into p
 * units   none
 * throws  nothing
 * source  own choice: inputs are declared causes, so they are not left to the cross stage
 * cost    trivial
 */
export function ownFeatures(layout: Layout, signal: number): Int32Array {
  const channels = [signal];
  for (let c = layout.signalCount; c < layout.channelCount; c++) channels.push(c);
  const out = new Int32Array(channels.length * layout.featureCount);
  channels.forEach((c, k) => {
    for (let f = 0; f < layout.featureCount; f++) out[k * layout.featureCount + f] = c * layout.featureCount + f;
  });
  return out;
}

/**
 * Ridge map of one signal's future on a chosen set of features.
 *
 * shapes  chosen (n) feature indices; result (n × steps)
 * units   standardised change per feature
 * throws  TrainError 'fit' if the moments are not positive definite even with the penalty
 * source  Hoerl & Kennard, Technometrics 12 (1970), equation 2.1, with k times each feature's second moment
 * cost    O(n³ + n² steps)
 */
export function ridgeOwn(
  moments: Moments,
  layout: Layout,
  signal: number,
  chosen: Int32Array,
  penalty: number,
): Float64Array {
  const p = layout.channelCount * layout.featureCount;
  const width = layout.signalCount * layout.steps;
  const n = chosen.length;
  const gram = new Float64Array(n * n);
  const map = new Float64Array(n * layout.steps);
  for (let a = 0; a < n; a++) {
    for (let b = 0; b < n; b++) gram[a * n + b] = moments.features[chosen[a] * p + chosen[b]];
    const row = chosen[a] * width + signal * layout.steps;
    for (let h = 0; h < layout.steps; h++) map[a * layout.steps + h] = moments.future[row + h];
  }
  addPenalty(gram, n, penalty);
  solveCholesky(cholesky(gram, n), n, map, layout.steps);
  return map;
}

/**
 * Own-stage map of all signals, laid out over all features.
 *
 * shapes  penalties (ny), null: zeros, the signal keeps its last value; result (p × ny·steps)
 * units   standardised change per feature
 * throws  as `ridgeOwn`
 * source  as `ridgeOwn`
 * cost    ny times `ridgeOwn`
 */
export function ownMap(moments: Moments, layout: Layout, penalties: readonly (number | null)[]): Float64Array {
  const width = layout.signalCount * layout.steps;
  const out = new Float64Array(layout.channelCount * layout.featureCount * width);
  for (let i = 0; i < layout.signalCount; i++) {
    const penalty = penalties[i];
    if (penalty === null) continue;
    const chosen = ownFeatures(layout, i);
    const map = ridgeOwn(moments, layout, i, chosen, penalty);
    chosen.forEach((f, a) => {
      out.set(map.subarray(a * layout.steps, (a + 1) * layout.steps), f * width + i * layout.steps);
    });
  }
  return out;
}

/**
 * The equations of the cross stage: what the own stage left, on the features of all channels.
 *
 * shapes  own (p × ny·steps); right likewise; gram(penalty) (p × p)
 * units   standardised; sums
 * throws  nothing
 * source  as `ridgeOwn`, on the residual: its cross moments are R - S own
 * cost    O(p² ny steps)
 */
export function crossSystem(
  moments: Moments,
  layout: Layout,
  own: Float64Array,
): { readonly right: Float64Array; readonly gram: (penalty: number) => Float64Array } {
  const p = layout.channelCount * layout.featureCount;
  const right = multiply(moments.features, own, p, p, layout.signalCount * layout.steps);
  for (let k = 0; k < right.length; k++) right[k] = moments.future[k] - right[k];
  const gram = (penalty: number): Float64Array => {
    const out = moments.features.slice();
    addPenalty(out, p, penalty);
    return out;
  };
  return { right, gram };
}

/**
 * The whole map: own stage, and the cross stage for the signals that have a penalty for it.
 *
 * shapes  ownPenalty, crossPenalty (ny); result (p × ny·steps)
 * units   standardised change per feature
 * throws  as `ridgeOwn`
 * source  as `ridgeOwn`
 * cost    O(p³/6 + 2 p² steps) a distinct cross penalty and signal
 */
export function twoStageMap(
  moments: Moments,
  layout: Layout,
  ownPenalty: readonly (number | null)[],
  crossPenalty: readonly (number | null)[],
): Float64Array {
  const { steps, signalCount } = layout;
  const p = layout.channelCount * layout.featureCount;
  const width = signalCount * steps;
  const map = ownMap(moments, layout, ownPenalty);
  const system = crossSystem(moments, layout, map);
  for (const penalty of new Set(crossPenalty)) {
    if (penalty === null) continue;
    const signals = crossPenalty.flatMap((own, i) => (own === penalty ? [i] : []));
    const right = new Float64Array(p * signals.length * steps);
    eachEntry(p, signals, steps, width, (packed, full) => {
      right[packed] = system.right[full];
    });
    solveCholesky(cholesky(system.gram(penalty), p), p, right, signals.length * steps);
    eachEntry(p, signals, steps, width, (packed, full) => {
      map[full] += right[packed];
    });
  }
  return map;
}

/** Pairs of places of the chosen signals' columns: in a matrix of those alone, and in the full one. */
function eachEntry(
  p: number,
  signals: readonly number[],
  steps: number,
  width: number,
  visit: (packed: number, full: number) => void,
): void {
  for (let f = 0; f < p; f++) {
    signals.forEach((i, k) => {
      for (let h = 0; h < steps; h++) visit((f * signals.length + k) * steps + h, f * width + i * steps + h);
    });
  }
}

/**
 * Mean squared error of a map on a block, by moments alone: (E - 2 M·R + M'SM) / origins.
 *
 * shapes  map (p × ny·steps); result (ny·steps)
 * units   standardised²
 * throws  nothing
 * source  definition
 * cost    O(p² ny steps)
 */
export function mapError(moments: Moments, layout: Layout, map: Float64Array): Float64Array {
  const p = layout.channelCount * layout.featureCount;
  const width = layout.signalCount * layout.steps;
  const pushed = multiply(moments.features, map, p, p, width);
  const out = moments.energy.slice();
  for (let f = 0; f < p; f++) {
    for (let k = 0; k < width; k++) {
      const at = f * width + k;
      out[k] += map[at] * (pushed[at] - 2 * moments.future[at]);
    }
  }
  for (let k = 0; k < width; k++) out[k] = Math.max(0, out[k]) / moments.origins;
  return out;
}

function addPenalty(gram: Float64Array, n: number, penalty: number): void {
  let largest = 0;
  for (let a = 0; a < n; a++) largest = Math.max(largest, gram[a * n + a]);
  const floor = largest > 0 ? largest * SILENT_SHARE : 1;
  for (let a = 0; a < n; a++) gram[a * n + a] += Math.max(penalty * gram[a * n + a], floor);
}
