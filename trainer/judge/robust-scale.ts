/**
 * Spread of errors that a few wild ones do not move, and what the filter's guard makes of it.
 */
import { quantiles } from '../history/order-statistics.ts';

/** A reading this many robust standard deviations off is passed over … */
export const REJECT_SD = 10;
/** … for this many ticks at most. */
export const REJECT_MOST_TICKS = 3;
/** Normal quantiles that make the median and the 90 % point of |error| estimates of a standard deviation. */
const MEDIAN_FACTOR = 1.4826;
const NINETY_FACTOR = 1 / 1.645;

/**
 * Robust standard deviation of errors, never below what the lattice alone would give, a step spread evenly; 1 where
 * there is no error to go by.
 *
 * shapes  sizes: absolute errors, NaN passed over
 * units   of the errors; `step` in the same
 * throws  nothing
 * source  Hampel, J. American Statistical Association 69 (1974)
 * cost    O(n)
 */
export function robustScale(sizes: Float64Array, step: number): number {
  const [median, ninety] = quantiles(sizes, [0.5, 0.9]);
  if (Number.isNaN(median)) return 1;
  return Math.max(MEDIAN_FACTOR * median, NINETY_FACTOR * ninety, step / Math.sqrt(12));
}
