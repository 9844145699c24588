/**
 * Two-sided cumulative sums of standardised numbers: small shifts that last add up, scatter does not. Limits are given as
 * the average number of sound readings to a false word, for independent normal numbers.
 */
import { ALLOWANCE } from '@stillwell/runtime/filter';

/** Mean overshoot of a normal random walk at both of its barriers, in standard deviations. */
const OVERSHOOT = 1.166;
const MOST_LIMIT = 200;

/**
 * A sum after one more number.
 *
 * units   standard deviations
 * source  Page, Biometrika 41 (1954)
 */
export function cusum(sum: number, share: number): number {
  return Math.max(0, sum + share - ALLOWANCE);
}

/**
 * Average run length of the two sums together at a limit, without a shift.
 *
 * units   limit in standard deviations; numbers
 * source  Siegmund, Sequential Analysis (1985), as given by Montgomery, Statistical Quality Control, section 9.1.2 (from
 *         memory); within two parts in a hundred of the published table, see the test
 */
export function runLengthOf(limit: number): number {
  const reach = 2 * ALLOWANCE * (limit + OVERSHOOT);
  return (Math.exp(reach) - reach - 1) / (2 * ALLOWANCE * ALLOWANCE) / 2;
}

/**
 * The limit at which a false word comes after so many numbers on average.
 *
 * units   runLength in numbers, above 1
 * source  `runLengthOf`, inverted by halving
 */
export function limitFor(runLength: number): number {
  let [low, high] = [0, MOST_LIMIT];
  for (let k = 0; k < 60; k++) {
    const middle = (low + high) / 2;
    if (runLengthOf(middle) < runLength) low = middle;
    else high = middle;
  }
  return high;
}
