/**
 * The correction: ridge regression of the remainders on random features, reduced to its leading directions, rounded in the
 * order in which the factors act, the read-out fitted to the directions as rounded.
 */
import { dequantise, quantiseTensor, type Tensor } from '@stillwell/protocol';
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { symmetricEigen, symmetrised } from '../linalg/eigen.ts';
import { multiply, multiplyTransposed, transpose } from '../linalg/products.ts';
import { replacements, roundRows } from '../quantise/feedback.ts';
import { type FeatureMap, type FeatureMoments, featureError } from './feature-moments.ts';

/** Variance of a cosine at a random phase: penalties are relative to it. */
const FEATURE_VARIANCE = 0.5;
/** Keeps solves with directions of unit variance steady. */
const READOUT_RIDGE = 1e-6;

/**
 * Ridge map with an unpenalised offset.
 *
 * shapes  as FeatureMap
 * units   penalty relative to the features' variance
 * throws  TrainError 'fit' from the solve
 * source  ridge regression about the means
 * cost    D³/6 + D² m
 */
export function ridgeFeatures(moments: FeatureMoments, penalty: number): FeatureMap {
  const { gram, cross } = aboutMeans(moments);
  const D = moments.sum.length;
  const m = moments.targetSum.length;
  for (let j = 0; j < D; j++) gram[j * D + j] += penalty * FEATURE_VARIANCE * moments.origins;
  solveCholesky(cholesky(gram, D), D, cross, m);
  return { weights: cross, offset: offsetOf(moments, cross) };
}

/**
 * What rounding needs of the moments: how each regressor is replaced by those after it.
 *
 * shapes  result (D × D)
 * units   standardised
 * throws  TrainError 'fit' if the moments are not positive definite
 * source  trainer/quantise/feedback.ts
 * cost    O(D³)
 */
export function roundingOf(moments: FeatureMoments): Float64Array {
  const covariance = aboutMeans(moments).gram.map((value) => value / moments.origins);
  return replacements(covariance, moments.sum.length);
}

function aboutMeans({ origins, sum, gram, targetSum, cross }: FeatureMoments): {
  gram: Float64Array;
  cross: Float64Array;
} {
  const D = sum.length;
  const m = targetSum.length;
  const centred = { gram: gram.slice(), cross: cross.slice() };
  for (let j = 0; j < D; j++) {
    for (let b = 0; b < D; b++) centred.gram[j * D + b] -= (sum[j] * sum[b]) / origins;
    for (let c = 0; c < m; c++) centred.cross[j * m + c] -= (sum[j] * targetSum[c]) / origins;
  }
  return centred;
}

/** What makes the map right on average. */
function offsetOf({ origins, sum, targetSum }: FeatureMoments, weights: Float64Array): Float64Array {
  const m = targetSum.length;
  const offset = targetSum.map((value) => value / origins);
  for (let j = 0; j < sum.length; j++) {
    for (let c = 0; c < m; c++) offset[c] -= (weights[j * m + c] * sum[j]) / origins;
  }
  return offset;
}

/** The correction in two factors. */
export interface Correction {
  readonly count: number;
  /** (k × D) directions of unit variance */
  readonly projection: Float64Array;
  /** (k) */
  readonly offset: Float64Array;
  /** (m × k) remainders from the directions */
  readonly readout: Float64Array;
  readonly tensors: { readonly projection: Tensor; readonly offset: Tensor } | null;
}

/**
 * Leading directions of a map, without rounding or with int8 projection and float32 offset; the read-out is left as it is.
 *
 * shapes  as Correction; at most `most` directions
 * units   standardised
 * throws  TrainError 'fit' from the solves
 * source  reduced-rank regression: Izenman, Journal of Multivariate Analysis 5 (1975)
 * cost    O(D² m + m³)
 */
export function reduceMap(
  moments: FeatureMoments,
  map: FeatureMap,
  most: number,
  rounding: Float64Array | null,
): Correction {
  const D = moments.sum.length;
  const m = map.offset.length;
  const { gram } = aboutMeans(moments);
  const pushed = multiply(gram, map.weights, D, D, m);
  const covariance = multiplyTransposed(map.weights, pushed, m, D, m).map((value) => value / moments.origins);
  const { values, vectors } = symmetricEigen(symmetrised(covariance, m), m);
  let count = 0;
  while (count < Math.min(most, m) && values[count] > values[0] * 1e-6 && values[count] > 0) count++;
  count = Math.max(1, count);
  const chosen = new Float64Array(m * count);
  for (let c = 0; c < m; c++) {
    for (let k = 0; k < count; k++) chosen[c * count + k] = vectors[c * m + k] / Math.sqrt(values[k] || 1);
  }
  const exact = transpose(multiply(map.weights, chosen, D, m, count), D, count);
  const tensor = rounding === null ? null : roundRows(exact, count, D, () => rounding);
  const projection = tensor === null ? exact : dequantise(tensor);
  const shift = negativeMeans(moments, projection, count);
  const shiftTensor = rounding !== null ? quantiseTensor(shift, count, 1, 'f32') : null;
  return {
    count,
    projection,
    offset: shiftTensor === null ? shift : dequantise(shiftTensor),
    readout: readoutOf(projection, count, gram, pushed, moments, m),
    tensors: tensor === null || shiftTensor === null ? null : { projection: tensor, offset: shiftTensor },
  };
}

/** The map's own output on the directions as they stand: fitted to the targets, they would lose what the penalty shrank. */
function readoutOf(
  projection: Float64Array,
  count: number,
  gram: Float64Array,
  pushed: Float64Array,
  moments: FeatureMoments,
  m: number,
): Float64Array {
  const D = moments.sum.length;
  const across = transpose(projection, count, D);
  const square = multiply(projection, multiply(gram, across, D, D, count), count, D, count);
  const shared = multiply(projection, pushed, count, D, m);
  for (let k = 0; k < count; k++) square[k * count + k] += READOUT_RIDGE * moments.origins;
  solveCholesky(cholesky(square, count), count, shared, m);
  return transpose(shared, count, m);
}

/**
 * Squared error of the targets under a correction, clips aside.
 *
 * shapes  none
 * units   standardised², summed over origins
 * throws  nothing
 * source  featureError
 * cost    O(D² m)
 */
export function correctionError(moments: FeatureMoments, { count, projection, offset, readout }: Correction): number {
  const D = moments.sum.length;
  const m = moments.targetSum.length;
  const across = transpose(readout, m, count);
  const map = {
    weights: multiply(transpose(projection, count, D), across, D, count, m),
    offset: multiply(offset, across, 1, count, m),
  };
  return featureError(moments, map).reduce((sum, value) => sum + value, 0);
}

function negativeMeans({ sum, origins }: FeatureMoments, projection: Float64Array, count: number): Float64Array {
  const D = sum.length;
  return Float64Array.from({ length: count }, (_, k) => {
    let mean = 0;
    for (let j = 0; j < D; j++) mean += projection[k * D + j] * sum[j];
    return -mean / origins;
  });
}
