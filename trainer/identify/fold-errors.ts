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
export const STUDENT = {
  0.1: [3.078, 1.886, 1.638, 1.533, 1.476, 1.44, 1.415],
  0.05: [6.314, 2.92, 2.353, 2.132, 2.015, 1.943, 1.895],
  0.005: [63.657, 9.925, 5.841, 4.604, 4.032, 3.707, 3.499],
} as const;

/** How errors of folds are averaged. */
export interface FoldWeights {
  /** (folds) of sum one. */
  readonly shares: readonly number[];
  /** Of the power mean: 0 is the geometric one, where no fold speaks louder for having more to err by; 1 the plain one. */
  readonly power: number;
  /** How much less sure a mean over these folds is than one over as many that shared nothing of what they learned from. */
  readonly doubt: number;
}

/**
 * Whether one choice's errors lie below another's: by more than a share on average, and by more than folds that
 * differ by chance would show in `chance` of cases. A single fold has only the share to go by.
 *
 * shapes  one error a fold, or a fold and signal, in both; shares as many
 * units   any, the same in both
 * throws  nothing
 * source  Student's test of paired differences, on logarithms or powers, weighted
 * cost    trivial
 */
export function gainsSurely(
  errors: readonly number[],
  others: readonly number[],
  share: number,
  weights: FoldWeights,
  chance: keyof typeof STUDENT = 0.1,
): boolean {
  const { shares } = weights;
  if (!(powerMean(errors, weights) < powerMean(others, weights) * (1 - share))) return false;
  const freedom = errors.length - 1;
  if (freedom === 0) return true;
  const [low, high] = [errors, others].map((some) => some.map((error) => bent(error, weights.power)));
  const gains = low.map((error, f) => high[f] - error);
  const mean = gains.reduce((sum, gain, f) => sum + shares[f] * gain, 0);
  const variance = gains.reduce((sum, gain, f) => sum + shares[f] * (gain - mean) * (gain - mean), 0);
  return mean >= STUDENT[chance][Math.min(freedom, 7) - 1] * weights.doubt * Math.sqrt(variance / freedom);
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

/**
 * Weighted power mean; in the geometric one a zero counts as the smallest number there is.
 *
 * shapes  values as many as shares
 * units   the values'
 * throws  nothing
 * source  definition
 * cost    trivial
 */
export function powerMean(values: readonly number[], { shares, power }: Omit<FoldWeights, 'doubt'>): number {
  let sum = 0;
  for (let f = 0; f < values.length; f++) sum += shares[f] * bent(values[f], power);
  return power === 0 ? Math.exp(sum) : sum ** (1 / power);
}

/** Index of the least value, the first of equals. */
export function leastIndex(values: readonly number[]): number {
  let best = 0;
  for (let k = 1; k < values.length; k++) if (values[k] < values[best]) best = k;
  return best;
}

/** What is averaged: the logarithm or a power. */
function bent(value: number, power: number): number {
  return power === 0 ? Math.log(Math.max(value, Number.MIN_VALUE)) : Math.max(value, 0) ** power;
}
