/**
 * The read-out in two factors: a few curves over the horizon shared by all signals, and each signal's coefficients on
 * them. It makes long horizons cheap in bytes. Curves by the same weighted reduced-rank step as the state; coefficients
 * by least squares on the curves as they stand, so rounding the curves first costs nothing twice.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { symmetricEigen, symmetrised } from '../linalg/eigen.ts';
import { multiply, transpose } from '../linalg/products.ts';
import { type StateMoments, stepWeight } from './bottleneck.ts';
import type { Layout } from './ridge.ts';

/** A share of the trace added to the state's covariance before it is solved with. */
const STATE_RIDGE = 1e-9;

/**
 * Full read-out of a state: the regression of the full map's forecast on it.
 *
 * shapes  moments of a state of order d; result (ny·steps × d), row i·steps + h - 1
 * units   standardised
 * throws  TrainError 'fit' if the state's covariance is not positive definite
 * source  normal equations
 * cost    O(d³ + d² ny steps)
 */
export function fullReadout(moments: StateMoments, order: number, layout: Layout): Float64Array {
  const width = layout.signalCount * layout.steps;
  const covariance = moments.covariance.slice();
  let trace = 0;
  for (let k = 0; k < order; k++) trace += covariance[k * order + k];
  for (let k = 0; k < order; k++) covariance[k * order + k] += (STATE_RIDGE * trace) / order || STATE_RIDGE;
  const solved = moments.shared.slice();
  solveCholesky(cholesky(covariance, order), order, solved, width);
  return transpose(solved, order, width);
}

/** Curves over the horizon in falling order of the energy they carry. */
export interface Curves {
  /** (steps × steps) column k the k-th curve. */
  readonly curves: Float64Array;
  /** (steps) energy of the weighted read-out along each, falling. */
  readonly energy: Float64Array;
}

/**
 * All curves of a read-out.
 *
 * shapes  readout (ny·steps × d), covariance of the state (d × d)
 * units   standardised
 * throws  TrainError 'fit' if the read-out is not finite
 * source  principal components of the read-out's rows over the horizon, in the norm of the state's covariance
 * cost    O(ny steps² d + steps³)
 */
export function findCurves(readout: Float64Array, covariance: Float64Array, order: number, layout: Layout): Curves {
  const { steps, signalCount } = layout;
  const gram = new Float64Array(steps * steps);
  const pushed = multiply(readout, covariance, signalCount * steps, order, order);
  for (let i = 0; i < signalCount; i++) {
    const from = i * steps * order;
    const rows = transpose(readout.subarray(from, from + steps * order), steps, order);
    const ahead = multiply(pushed.subarray(from, from + steps * order), rows, steps, order, steps);
    for (let g = 0; g < steps; g++) {
      for (let h = 0; h < steps; h++)
        gram[g * steps + h] += ahead[g * steps + h] * stepWeight(g + 1) * stepWeight(h + 1);
    }
  }
  const { values, vectors } = symmetricEigen(symmetrised(gram, steps), steps);
  const curves = vectors.map((value, at) => value / stepWeight(Math.floor(at / steps) + 1));
  return { curves, energy: values.map((value) => Math.max(0, value)) };
}

/**
 * The first curves, one a column.
 *
 * shapes  result (steps × count)
 * units   standardised
 * throws  nothing
 * source  none
 * cost    trivial
 */
export function firstCurves(all: Curves, steps: number, count: number): Float64Array {
  const out = new Float64Array(steps * count);
  for (let h = 0; h < steps; h++) for (let k = 0; k < count; k++) out[h * count + k] = all.curves[h * steps + k];
  return out;
}

/**
 * Coefficients of every signal on given curves.
 *
 * shapes  readout (ny·steps × d), curves (steps × r); result (ny·r × d), row i·r + k
 * units   standardised
 * throws  TrainError 'fit' if the curves are linearly dependent
 * source  weighted least squares over the horizon
 * cost    O(ny steps r d)
 */
export function curveCoefficients(
  readout: Float64Array,
  curves: Float64Array,
  order: number,
  layout: Layout,
  count: number,
): Float64Array {
  const { steps, signalCount } = layout;
  const weighted = curves.map((value, at) => value / (Math.floor(at / count) + 1));
  const acrossSteps = transpose(weighted, steps, count);
  const gram = multiply(acrossSteps, curves, count, steps, count);
  let trace = 0;
  for (let k = 0; k < count; k++) trace += gram[k * count + k];
  for (let k = 0; k < count; k++) gram[k * count + k] += (STATE_RIDGE * trace) / count || STATE_RIDGE;
  const factor = cholesky(gram, count);
  const out = new Float64Array(signalCount * count * order);
  for (let i = 0; i < signalCount; i++) {
    const rows = readout.subarray(i * steps * order, (i + 1) * steps * order);
    const right = multiply(acrossSteps, rows, count, steps, order);
    solveCholesky(factor, count, right, order);
    out.set(right, i * count * order);
  }
  return out;
}

/**
 * Coefficients on given curves of every column of a map over the horizon, as `curveCoefficients` finds them.
 *
 * shapes  map (rows × steps), curves (steps × r); result (rows × r)
 * units   standardised
 * throws  TrainError 'fit' if the curves are linearly dependent
 * source  weighted least squares over the horizon
 * cost    O(rows steps r)
 */
export function onCurves(map: Float64Array, curves: Float64Array, steps: number, count: number): Float64Array {
  const layout = { channelCount: 1, signalCount: 1, featureCount: 1, steps };
  const rows = map.length / steps;
  return transpose(curveCoefficients(transpose(map, rows, steps), curves, rows, layout, count), count, rows);
}
