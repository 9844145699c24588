/**
 * Whether a choice surely beats another over the folds of a rolling origin: where folds disagree, it would follow chance.
 */

/** Student's t at 90 %, one-sided, by degrees of freedom from 1 (any table); more folds than these there are never. */
const STUDENT_90 = [3.078, 1.886, 1.638, 1.533, 1.476, 1.44, 1.415] as const;

/**
 * Whether one choice's errors lie below another's: by more than a share on geometric average, and by more than folds that
 * differ by chance would show in one case of ten. A single fold has only the share to go by.
 *
 * shapes  errors, others (folds), at most 8
 * units   squared errors of the same signal
 * throws  nothing
 * source  paired t test on logarithms: Student, Biometrika 6 (1908)
 * cost    trivial
 */
export function gainsSurely(errors: readonly number[], others: readonly number[], share: number): boolean {
  const gains = gainsOf(errors, others);
  return meanOf(gains) > -Math.log(1 - share) && sureGain(errors, others) >= 0;
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
  const gains = gainsOf(errors, others);
  const freedom = gains.length - 1;
  const mean = meanOf(gains);
  if (freedom === 0) return mean;
  const squares = gains.reduce((sum, gain) => sum + (gain - mean) * (gain - mean), 0);
  return mean - STUDENT_90[freedom - 1] * Math.sqrt(squares / (freedom * gains.length));
}

function gainsOf(errors: readonly number[], others: readonly number[]): number[] {
  return errors.map((error, f) => logOf(others[f]) - logOf(error));
}

function meanOf(values: readonly number[]): number {
  return values.reduce((sum, value) => sum + value, 0) / values.length;
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
  let sum = 0;
  for (const value of values) sum += logOf(value);
  return Math.exp(sum / values.length);
}

function logOf(value: number): number {
  return Math.log(Math.max(value, Number.MIN_VALUE));
}
