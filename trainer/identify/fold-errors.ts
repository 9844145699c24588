/**
 * Errors of choices on folds, and when one choice's errors lie below another's surely enough to take it.
 */
import type { Moments } from './moments.ts';

/** What a fold learns from, about its means, and what judges it. A fold counts by what it learned from. */
export interface Fold {
  readonly learn: Moments;
  readonly judge: Moments;
}

/** (folds) of (ny · trial steps), signal by signal. */
export type FoldErrors = readonly Float64Array[];

/** Student's t, one-sided, by chance of error and degrees of freedom from 1 (any table); for more than 7, that of 7. */
const STUDENT = {
  0.1: [3.078, 1.886, 1.638, 1.533, 1.476, 1.44, 1.415],
  0.05: [6.314, 2.92, 2.353, 2.132, 2.015, 1.943, 1.895],
  0.005: [63.657, 9.925, 5.841, 4.604, 4.032, 3.707, 3.499],
} as const;

/**
 * Weight of each fold: the origins it learned from, since the final fit learns from more than any of them.
 *
 * shapes  result (folds)
 * units   shares of one
 * throws  nothing
 * source  own choice
 * cost    trivial
 */
export function foldWeights(folds: readonly Fold[]): number[] {
  const total = folds.reduce((sum, { learn }) => sum + learn.origins, 0);
  return folds.map(({ learn }) => learn.origins / total);
}

/**
 * Whether one choice's errors lie below another's: by more than a share on geometric average, and by more than folds that
 * differ by chance would show in `chance` of cases. A single fold has only the share to go by.
 *
 * shapes  one error a fold, or a fold and signal, in both; weights as many, of sum one
 * units   any, the same in both
 * throws  nothing
 * source  Student's test of paired differences, on logarithms, weighted
 * cost    trivial
 */
export function gainsSurely(
  errors: readonly number[],
  others: readonly number[],
  share: number,
  weights: readonly number[],
  chance: keyof typeof STUDENT = 0.1,
): boolean {
  const gains = errors.map((error, f) => logOf(others[f]) - logOf(error));
  const freedom = gains.length - 1;
  const mean = gains.reduce((sum, gain, f) => sum + weights[f] * gain, 0);
  if (!(mean > -Math.log(1 - share))) return false;
  if (freedom === 0) return true;
  const variance = gains.reduce((sum, gain, f) => sum + weights[f] * (gain - mean) * (gain - mean), 0);
  return mean >= STUDENT[chance][Math.min(freedom, 7) - 1] * Math.sqrt(variance / freedom);
}

/**
 * One number a fold: the sum of the errors of some signals at some steps.
 *
 * shapes  errors as FoldErrors with `steps` steps a signal; result (folds)
 * units   as the errors'
 * throws  nothing
 * source  none
 * cost    trivial
 */
export function sumOver(
  errors: FoldErrors,
  steps: number,
  isWanted: (signal: number, step: number) => boolean,
): number[] {
  return errors.map((fold) => {
    let sum = 0;
    for (let k = 0; k < fold.length; k++) if (isWanted(Math.floor(k / steps), k % steps)) sum += fold[k];
    return sum;
  });
}

/** Weighted geometric mean, weights of sum one; a zero counts as the smallest number there is. */
export function geometric(values: readonly number[], weights: readonly number[]): number {
  let sum = 0;
  for (let f = 0; f < values.length; f++) sum += weights[f] * logOf(values[f]);
  return Math.exp(sum);
}

/** Index of the least value, the first of equals. */
export function leastIndex(values: readonly number[]): number {
  let best = 0;
  for (let k = 1; k < values.length; k++) if (values[k] < values[best]) best = k;
  return best;
}

function logOf(value: number): number {
  return Math.log(Math.max(value, Number.MIN_VALUE));
}
