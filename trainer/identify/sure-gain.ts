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
  const gains = errors.map((error, f) => logOf(others[f]) - logOf(error));
  const freedom = gains.length - 1;
  const mean = gains.reduce((sum, gain) => sum + gain, 0) / gains.length;
  if (!(mean > -Math.log(1 - share))) return false;
  if (freedom === 0) return true;
  const squares = gains.reduce((sum, gain) => sum + (gain - mean) * (gain - mean), 0);
  return mean >= STUDENT_90[freedom - 1] * Math.sqrt(squares / (freedom * gains.length));
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
