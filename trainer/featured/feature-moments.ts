/**
 * Second moments of random features and of what they are to explain, group by group, so that folds, penalties and read-outs
 * are small algebra.
 */
import type { FeatureTensors } from '@stillwell/protocol';
import { SUMMARY_LIMIT, scaledFeatures } from '@stillwell/runtime/filter';
import { addLowerGram } from '../linalg/gram.ts';
import { addTransposed, multiply } from '../linalg/products.ts';
import type { Origins } from './origins.ts';

/** What the features see, and how many there are: the part of the bundle's section that is chosen, not learned. */
export type FeatureSetting = Pick<FeatureTensors, 'seed' | 'count' | 'states' | 'channels' | 'lags' | 'scale'>;

/** Sums over origins. D regressors, m targets. */
export interface FeatureMoments {
  readonly origins: number;
  /** (D) */
  readonly sum: Float64Array;
  /** (D × D) */
  readonly gram: Float64Array;
  /** (m) */
  readonly targetSum: Float64Array;
  /** (D × m) */
  readonly cross: Float64Array;
  /** (m) sums of squares of the targets. */
  readonly square: Float64Array;
}

const TURN = 2 * Math.PI;
const BLOCK = 64;

/**
 * Gathers moments of the origins from `from` to before `to`: of the predictive states, then the random features.
 *
 * shapes  as FeatureMoments; m = ny·r
 * units   standardised
 * throws  nothing
 * source  definition
 * cost    O(n D² / 2 + n D (q + m))
 */
export function gatherFeatures(origins: Origins, setting: FeatureSetting, from: number, to: number): FeatureMoments {
  const D = regressorCount(origins, setting);
  const { targets } = origins;
  const m = targets.length / origins.at.length;
  const moments = emptyMoments(D, m);
  const evaluate = featureEvaluator(origins, setting);
  const block = new Float64Array(BLOCK * D);
  for (let start = from; start < to; start += BLOCK) {
    const rows = Math.min(BLOCK, to - start);
    for (let k = 0; k < rows; k++) evaluate(start + k, block, k * D);
    addLowerGram(moments.gram, block, rows, D);
    addTransposed(moments.cross, block, targets.subarray(start * m), D, rows, m);
    for (let k = 0; k < rows; k++) {
      const aim = (start + k) * m;
      for (let j = 0; j < D; j++) moments.sum[j] += block[k * D + j];
      for (let c = 0; c < m; c++) {
        moments.targetSum[c] += targets[aim + c];
        moments.square[c] += targets[aim + c] * targets[aim + c];
      }
    }
  }
  for (let a = 0; a < D; a++) for (let b = 0; b < a; b++) moments.gram[b * D + a] = moments.gram[a * D + b];
  return { ...moments, origins: to - from };
}

/** Predictive states and random features together. */
function regressorCount({ states, at }: Origins, setting: FeatureSetting): number {
  return states.length / at.length + setting.count;
}

/** Writes states and features of an origin. */
function featureEvaluator(
  origins: Origins,
  setting: FeatureSetting,
): (origin: number, out: Float64Array, to: number) => void {
  const q = setting.scale.length;
  const { frequencies, phases } = scaledFeatures(setting.seed, setting.count, setting.scale);
  const radians = frequencies.map((turns) => TURN * turns);
  const offsets = phases.map((turns) => TURN * turns);
  const v = new Float64Array(q);
  const d = origins.states.length / origins.at.length;
  return (origin, out, to) => {
    writeSummary(origins, setting, origin, v);
    for (let k = 0; k < d; k++) out[to + k] = clipped(origins.states[origin * d + k]);
    for (let j = 0; j < setting.count; j++) {
      let angle = offsets[j];
      for (let k = 0; k < q; k++) angle += radians[j * q + k] * v[k];
      out[to + d + j] = Math.cos(angle);
    }
  };
}

/** As the gateway will. */
function writeSummary({ states, folded, at }: Origins, setting: FeatureSetting, origin: number, v: Float64Array): void {
  const d = states.length / at.length;
  let k = 0;
  for (; k < setting.states; k++) v[k] = states[origin * d + k];
  for (const lag of [0, ...setting.lags]) {
    for (const c of setting.channels) v[k++] = folded.values[c][Math.max(0, at[origin] - lag - folded.from)];
  }
  for (let j = 0; j < k; j++) v[j] = clipped(v[j]);
}

function clipped(value: number): number {
  return Math.max(-SUMMARY_LIMIT, Math.min(SUMMARY_LIMIT, value));
}

function emptyMoments(D: number, m: number): Omit<FeatureMoments, 'origins'> {
  return {
    sum: new Float64Array(D),
    gram: new Float64Array(D * D),
    targetSum: new Float64Array(m),
    cross: new Float64Array(D * m),
    square: new Float64Array(m),
  };
}

/**
 * Sum of several groups' moments.
 *
 * shapes  as FeatureMoments
 * units   standardised
 * throws  nothing
 * source  none
 * cost    O(D² groups)
 */
export function addFeatureMoments(parts: readonly FeatureMoments[]): FeatureMoments {
  const add = (pick: (part: FeatureMoments) => Float64Array): Float64Array => {
    const out = pick(parts[0]).slice();
    for (const part of parts.slice(1)) {
      const more = pick(part);
      for (let k = 0; k < out.length; k++) out[k] += more[k];
    }
    return out;
  };
  return {
    origins: parts.reduce((sum, part) => sum + part.origins, 0),
    sum: add((part) => part.sum),
    gram: add((part) => part.gram),
    targetSum: add((part) => part.targetSum),
    cross: add((part) => part.cross),
    square: add((part) => part.square),
  };
}

/** A linear map of the features with its offset. */
export interface FeatureMap {
  /** (D × m) */
  readonly weights: Float64Array;
  /** (m) */
  readonly offset: Float64Array;
}

/**
 * Squared error of a map by moments.
 *
 * shapes  result (m), sums over the origins
 * units   standardised²
 * throws  nothing
 * source  |t − W'φ − o|² multiplied out
 * cost    O(D² m)
 */
export function featureError(moments: FeatureMoments, { weights, offset }: FeatureMap): Float64Array {
  const { sum, gram, targetSum, cross, square, origins } = moments;
  const D = sum.length;
  const m = offset.length;
  const out = new Float64Array(m);
  const pushed = multiply(gram, weights, D, D, m);
  const mean = new Float64Array(m);
  for (let j = 0; j < D; j++) {
    for (let c = 0; c < m; c++) {
      out[c] += weights[j * m + c] * (pushed[j * m + c] - 2 * cross[j * m + c]);
      mean[c] += weights[j * m + c] * sum[j];
    }
  }
  for (let c = 0; c < m; c++) {
    out[c] += square[c] - 2 * offset[c] * targetSum[c] + origins * offset[c] * offset[c] + 2 * offset[c] * mean[c];
    out[c] = Math.max(0, out[c]);
  }
  return out;
}
