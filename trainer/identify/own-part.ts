/**
 * A map in two parts: what each signal's own features, and the inputs', give of its forecast, and what is left for the
 * joint state. The own part costs bytes by its curves alone, however many directions it spans; the joint state then need
 * carry only what signals say of each other, and a few numbers do.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { multiply } from '../linalg/products.ts';
import { type Bottleneck, findDirections } from './bottleneck.ts';
import { type Layout, ownFeatures } from './ridge.ts';

/** What the own part leaves of a map. */
export interface Apart {
  /** (p × ny·steps) */
  readonly rest: Float64Array;
  /** Directions of the rest; of the whole map where the rest is nothing. */
  readonly bottleneck: Bottleneck;
  /** Whether signals say anything of each other. */
  readonly isJoint: boolean;
}

/** A share of each diagonal entry added before features are solved with. */
const FEATURE_RIDGE = 1e-9;

/**
 * Splits a map.
 *
 * shapes  covariance (p × p), map (p × ny·steps), whole: the map's own directions, most the largest order of interest
 * units   standardised
 * throws  TrainError 'fit' if the covariance is not positive definite
 * source  own part: the regression of the map's forecast on the own features
 * cost    O(ny (F p steps + F³)) and one `findDirections`
 */
export function splitOwn(
  covariance: Float64Array,
  map: Float64Array,
  layout: Layout,
  whole: Bottleneck,
  most: number,
): Apart {
  const { steps, signalCount } = layout;
  const p = layout.channelCount * layout.featureCount;
  const width = signalCount * steps;
  const rest = map.slice();
  let isJoint = false;
  for (let i = 0; i < signalCount; i++) {
    const columns = new Float64Array(p * steps);
    for (let f = 0; f < p; f++)
      columns.set(map.subarray(f * width + i * steps, f * width + (i + 1) * steps), f * steps);
    const chosen = ownFeatures(layout, i);
    const isOwn = new Set(chosen);
    if (columns.some((value, at) => value !== 0 && !isOwn.has(Math.floor(at / steps)))) isJoint = true;
    const own = ownCoefficients(covariance, p, chosen, columns, steps);
    chosen.forEach((f, a) => {
      for (let h = 0; h < steps; h++) rest[f * width + i * steps + h] -= own[a * steps + h];
    });
  }
  return { rest, isJoint, bottleneck: isJoint ? findDirections(covariance, rest, layout, most) : whole };
}

/**
 * Regression of combinations of all features on some of them.
 *
 * shapes  chosen (n) ascending indices into p; target (p × columns); result (n × columns)
 * units   as the target's
 * throws  TrainError 'fit' if the chosen features' covariance is not positive definite
 * source  normal equations
 * cost    O(n p columns + n³)
 */
export function ownCoefficients(
  covariance: Float64Array,
  p: number,
  chosen: Int32Array,
  target: Float64Array,
  columns: number,
): Float64Array {
  const n = chosen.length;
  const gram = new Float64Array(n * n);
  const rows = new Float64Array(n * p);
  let largest = 0;
  for (let a = 0; a < n; a++) {
    const row = covariance.subarray(chosen[a] * p, (chosen[a] + 1) * p);
    rows.set(row, a * p);
    for (let b = 0; b < n; b++) gram[a * n + b] = row[chosen[b]];
    largest = Math.max(largest, gram[a * n + a]);
  }
  for (let a = 0; a < n; a++) gram[a * n + a] += FEATURE_RIDGE * Math.max(gram[a * n + a], FEATURE_RIDGE * largest);
  const out = multiply(rows, target, n, p, columns);
  solveCholesky(cholesky(gram, n), n, out, columns);
  return out;
}
