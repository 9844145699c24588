/**
 * Sure gains where every fold counts alike: what fold-errors.ts says for weights of folds, with even ones.
 */
import { type FoldWeights, gainsSurely as gainsSurelyWeighted, powerMean, STUDENT } from './fold-errors.ts';

/** Every fold alike, averaged geometrically. */
function evenly(folds: number): FoldWeights {
  return { shares: new Array<number>(folds).fill(1 / folds), power: 0, doubt: 1 };
}

/**
 * Whether one choice's errors lie below another's: by more than a share on geometric average, and by more than folds that
 * differ by chance would show in one case of ten. A single fold has only the share to go by.
 *
 * shapes  errors, others (folds), at most 8
 * units   squared errors of the same signal
 * throws  nothing
 * source  as `gainsSurely` of fold-errors.ts
 * cost    trivial
 */
export function gainsSurely(errors: readonly number[], others: readonly number[], share: number): boolean {
  return gainsSurelyWeighted(errors, others, share, evenly(errors.length));
}

/**
 * The gain of one choice over another that chance leaves in nine cases of ten: mean logarithm of the ratio of their errors,
 * less what its folds allow. A single fold allows nothing.
 *
 * shapes  errors, others (folds), at most 8
 * units   natural logarithm of a ratio of squared errors; above 0 where the first is surely better
 * throws  nothing
 * source  as `gainsSurely`
 * cost    trivial
 */
export function sureGain(errors: readonly number[], others: readonly number[]): number {
  const gains = errors.map((error, f) => logOf(others[f]) - logOf(error));
  const freedom = gains.length - 1;
  const mean = gains.reduce((sum, gain) => sum + gain, 0) / gains.length;
  if (freedom === 0) return mean;
  const squares = gains.reduce((sum, gain) => sum + (gain - mean) * (gain - mean), 0);
  return mean - STUDENT[0.1][Math.min(freedom, 7) - 1] * Math.sqrt(squares / (freedom * gains.length));
}

/**
 * Geometric mean, so that no fold speaks louder than another; zeros count as the least number above zero.
 *
 * shapes  none
 * units   as the values
 * throws  nothing
 * source  definition
 * cost    trivial
 */
export function geometricMean(values: readonly number[]): number {
  return powerMean(values, evenly(values.length));
}

function logOf(value: number): number {
  return Math.log(Math.max(value, Number.MIN_VALUE));
}
