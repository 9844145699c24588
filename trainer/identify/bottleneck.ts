/**
 * The predictive state: the few combinations of the past that carry most of the forecast. From the ridge map and the
 * features' second moments, one joint reduced-rank step over all signals and steps; step h is weighted 1/√h, since an
 * error one step ahead is small and would be traded away otherwise. The joint state beat one state a signal, and plain
 * weighting beat the canonical-correlation one, where both were measured. Not a recursion: the bank remains the memory.
 */
import { cholesky, solveLowerTransposed } from '../linalg/cholesky.ts';
import { leadingEigen } from '../linalg/leading-eigen.ts';
import { multiply, multiplyTransposed, transpose } from '../linalg/products.ts';
import type { Layout } from './ridge.ts';

/** Directions of the state in falling order of what they carry. */
export interface Bottleneck {
  /** (n × p), row k the k-th direction; each gives a state of unit variance. */
  readonly directions: Float64Array;
  /** (n) standard deviation carried by each direction in the weighted forecast. */
  readonly carried: Float64Array;
}

/** Directions that carry less than this share of the first are noise of the arithmetic. */
const LEAST_SHARE = 1e-5;

/**
 * All directions worth keeping.
 *
 * shapes  covariance (p × p) mean products of features, map (p × ny·steps), most the largest order of interest
 * units   standardised
 * throws  TrainError 'fit' if the covariance is not positive definite
 * source  reduced-rank regression: Izenman, Journal of Multivariate Analysis 5 (1975), with the step weights as norm
 * cost    the leading eigenvectors of a matrix of min(p, ny·steps), and products of that size
 */
export function findDirections(covariance: Float64Array, map: Float64Array, layout: Layout, most: number): Bottleneck {
  const p = layout.channelCount * layout.featureCount;
  const width = layout.signalCount * layout.steps;
  const weighted = weightSteps(map, layout);
  const factor = cholesky(covariance, p);
  const spread = multiplyTransposed(factor, weighted, p, p, width);
  const isWide = width > p;
  const gram = isWide
    ? multiply(spread, transpose(spread, p, width), p, width, p)
    : multiplyTransposed(spread, spread, width, p, width);
  const size = isWide ? p : width;
  const found = Math.min(most, size);
  const { values, vectors } = leadingEigen(gram, size, found);
  let n = 0;
  while (n < found && values[n] > values[0] * LEAST_SHARE * LEAST_SHARE && values[n] > 0) n++;
  n = Math.max(n, 1);
  const carried = Float64Array.from({ length: n }, (_, k) => Math.sqrt(Math.max(0, values[k])));
  const columns = new Float64Array(size * n);
  for (let i = 0; i < size; i++) for (let k = 0; k < n; k++) columns[i * n + k] = vectors[i * found + k];
  if (isWide) {
    // Row k of W is q' L⁻¹: the column solves L' w = q.
    solveLowerTransposed(factor, p, columns, n);
    return { directions: transpose(columns, p, n), carried };
  }
  const directions = transpose(multiply(weighted, columns, p, width, n), p, n);
  for (let k = 0; k < n; k++) {
    const unit = carried[k] > 0 ? 1 / carried[k] : 1;
    for (let f = 0; f < p; f++) directions[k * p + f] *= unit;
  }
  return { directions, carried };
}

/** Covariance of a state, W S W', and what it shares with the full forecast, W S M. */
export interface StateMoments {
  /** (d × d) */
  readonly covariance: Float64Array;
  /** (d × ny·steps) */
  readonly shared: Float64Array;
}

/**
 * Moments of a state with the full map's forecast.
 *
 * shapes  directions (d × p), covariance (p × p), map (p × ny·steps)
 * units   standardised
 * throws  nothing
 * source  definition
 * cost    O(d p² + d p ny steps)
 */
export function stateMoments(
  directions: Float64Array,
  order: number,
  covariance: Float64Array,
  map: Float64Array,
  layout: Layout,
): StateMoments {
  const p = layout.channelCount * layout.featureCount;
  const pushed = multiply(directions, covariance, order, p, p);
  return {
    covariance: multiply(pushed, transpose(directions, order, p), order, p, order),
    shared: multiply(pushed, map, order, p, layout.signalCount * layout.steps),
  };
}

/** Weight of step h in the joint step. */
export function stepWeight(step: number): number {
  return 1 / Math.sqrt(step);
}

function weightSteps(map: Float64Array, layout: Layout): Float64Array {
  return map.map((value, at) => value * stepWeight((at % layout.steps) + 1));
}
