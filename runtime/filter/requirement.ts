/** How a model is refused: one error that names the field, what was expected and what was found. */
import { FilterError } from './errors.ts';

/** Largest size of a weight: three products of weights and clipped features then stay far below the float64 range. */
export const WEIGHT_LIMIT = 1e60;

/**
 * Refuses a model unless a condition holds.
 *
 * throws  FilterError 'model' naming the field, expected and got
 */
export function requireField(holds: boolean, field: string, expected: string, got: unknown): void {
  if (holds) return;
  throw new FilterError('model', `model ${field}: expected ${expected}, got ${got}; fit the bundle again`, {
    details: { field, expected, got },
  });
}

/**
 * Refuses a model unless every number of an array passes.
 *
 * throws  FilterError 'model' naming the first that does not
 */
export function requireEach(
  values: Float64Array,
  name: string,
  isGood: (value: number) => boolean,
  expected: string,
): void {
  for (let k = 0; k < values.length; k++) requireField(isGood(values[k]), `${name}[${k}]`, expected, values[k]);
}

/**
 * Refuses a model with a weight that is not finite or beyond WEIGHT_LIMIT.
 *
 * throws  FilterError 'model' naming the first such weight
 */
export function requireWeights(values: Float64Array, name: string): void {
  requireEach(
    values,
    name,
    (value) => Math.abs(value) <= WEIGHT_LIMIT,
    `a finite number, at most ${WEIGHT_LIMIT} in size`,
  );
}

/**
 * Refuses a model with an array of another length.
 *
 * throws  FilterError 'model' naming the array
 */
export function requireLength(values: { readonly length: number }, name: string, expected: number): void {
  requireField(values.length === expected, name, `${expected} numbers`, `${values.length} numbers`);
}

/**
 * Refuses a model with a count that is not a whole number in a range.
 *
 * throws  FilterError 'model' naming the count
 */
export function requireWhole(value: number, name: string, low: number, high: number): void {
  requireField(
    Number.isInteger(value) && value >= low && value <= high,
    name,
    `a whole number ${low} to ${high}`,
    value,
  );
}
