/** Bounds of sums of squared standard normal numbers, for an even number of them, where the tail is a finite sum. */

/**
 * The probability that a sum of `freedom` squares exceeds x.
 *
 * units   freedom even, from 2
 * source  Abramowitz and Stegun, Handbook of Mathematical Functions, 26.4.21 (from memory); checked against R
 */
export function chiSquareTail(freedom: number, x: number): number {
  let term = Math.exp(-x / 2);
  let sum = term;
  for (let k = 1; k < freedom / 2; k++) {
    term *= x / (2 * k);
    sum += term;
  }
  return sum;
}

/**
 * What such a sum exceeds with the given probability.
 *
 * units   freedom even, from 2 to 200; probability in (0, 1)
 * source  `chiSquareTail`, inverted by halving
 */
export function chiSquareLimit(freedom: number, probability: number): number {
  let [low, high] = [0, 8 * freedom + 100];
  for (let k = 0; k < 80; k++) {
    const middle = (low + high) / 2;
    if (chiSquareTail(freedom, middle) > probability) low = middle;
    else high = middle;
  }
  return high;
}
