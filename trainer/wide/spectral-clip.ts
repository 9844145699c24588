/** A regressed recursion made stable: on few rows its poles come out beyond the unit circle, and forecasts then run away. */
import { EigenvalueDecomposition } from 'ml-matrix';
import { TrainError } from '../errors.ts';
import { toMatrix } from '../linalg/solve.ts';

/** Poles are brought within this modulus: a memory of a thousand ticks, longer than any horizon. */
export const MOST_RADIUS = 0.999;

/**
 * The matrix, scaled where its spectral radius is beyond MOST_RADIUS, and the radius it had.
 *
 * shapes  a (n × n)
 * units   per tick
 * throws  TrainError 'fit' if an entry is not finite
 * source  eigenvalues by Hessenberg form and QR steps as in ml-matrix; scaling moves all poles inwards alike, which keeps
 *         their angles, that is the periods
 * cost    about 10 n³ operations
 */
export function clipRadius(a: Float64Array, n: number): { matrix: Float64Array; radius: number } {
  if (!a.every(Number.isFinite))
    throw new TrainError('fit', 'The recursion of the state has an entry that is not finite, expected finite numbers.');
  if (n === 0) return { matrix: a, radius: 0 };
  const { realEigenvalues, imaginaryEigenvalues } = new EigenvalueDecomposition(toMatrix(a, n, n), {
    assumeSymmetric: false,
  });
  const radius = realEigenvalues.reduce((most, re, k) => Math.max(most, Math.hypot(re, imaginaryEigenvalues[k])), 0);
  return { matrix: radius > MOST_RADIUS ? a.map((value) => (value * MOST_RADIUS) / radius) : a, radius };
}
