/**
 * Which decimals a reading needs: the step of a sensor that nobody has declared, found reading by reading. The trainer finds
 * it in a whole history by the same rule, so that both lay a reading on the same value.
 */
import { latticeIndex, latticeValue } from '@stillwell/protocol';

/** Decimals looked for in readings of about 1; as many more in smaller ones … */
const MOST_OF_ONE = 9;
/** … up to what a step's reciprocal can hold. */
const MOST = 15;
/** Rounding of a few operations in double precision, relative. */
const DOUBLE_TOLERANCE = 2 ** -50;
/** Half a unit in the last place of a 32-bit float, relative, and a little. */
const SINGLE_TOLERANCE = 2 ** -24 * 1.01;

/** Steps of 0, 1, 2, … decimals. */
export const STEPS: readonly number[] = Array.from({ length: MOST + 1 }, (_, decimals) => 1 / 10 ** decimals);

/**
 * Fewest decimals that give the reading back; -1 where it has more digits than a sensor has: a computed one.
 *
 * A 32-bit float printed with all its digits (5.827000141143799) counts as the decimals that it stands for (5.827).
 */
export function decimalsOf(value: number): number {
  const size = Math.abs(value);
  if (size === 0) return 0;
  const most = Math.min(MOST, MOST_OF_ONE + Math.max(0, -Math.floor(Math.log10(size)) - 1));
  const exact = fewest(value, size * DOUBLE_TOLERANCE, most);
  if (exact >= 0 || Math.abs(value - Math.fround(value)) > size * DOUBLE_TOLERANCE) return exact;
  // Where a step is not well above a float's own, it would fit anything and prove nothing.
  const finest = Math.floor(-Math.log10(size * SINGLE_TOLERANCE * 8));
  return fewest(value, size * SINGLE_TOLERANCE, Math.min(most, finest));
}

function fewest(value: number, tolerance: number, most: number): number {
  for (let decimals = 0; decimals <= most; decimals++) if (isOn(value, STEPS[decimals]!, tolerance)) return decimals;
  return -1;
}

/** Whether a reading lies on the lattice of a step, give or take a few roundings; the common case, and cheap. */
export function isOnStep(value: number, step: number): boolean {
  return isOn(value, step, Math.abs(value) * DOUBLE_TOLERANCE);
}

function isOn(value: number, step: number, tolerance: number): boolean {
  return Math.abs(latticeValue(latticeIndex(value, step, 0), step, 0) - value) <= tolerance;
}
