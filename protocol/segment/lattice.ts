/**
 * A sensor's own lattice: the readings offset + k × step for integer k. Segments carry k, so that nothing finer than the
 * sensor is ever paid for and nothing the sensor said is ever lost.
 *
 * Not for finding the lattice of a history; that is the trainer's work.
 */

/** How near 1/step must lie to an integer m for readings to be taken as offset + k/m. Decimals such as 0.3 then come back exactly. */
const RECIPROCAL_TOLERANCE = 1e-9;

/**
 * Nearest lattice index of a reading; nought is never -0.
 *
 * units   value, step and offset in the channel's unit; step > 0; NaN stays NaN
 * throws  nothing; the caller has checked the lattice
 * source  plain rounding, halves upwards (ECMA-262, Math.round)
 */
export function latticeIndex(value: number, step: number, offset: number): number {
  const reciprocal = Math.round(1 / step);
  const raw = value - offset;
  return Math.round(isReciprocal(step, reciprocal) ? raw * reciprocal : raw / step) + 0;
}

/**
 * Reading at a lattice index.
 *
 * units   step and offset in the channel's unit; k an integer, NaN stays NaN
 * throws  nothing; the caller has checked the lattice
 * source  k/m rather than k × step where step = 1/m: division rounds once, so 3/10 is the double nearest 0.3, which 3 × 0.1 is not
 */
export function latticeValue(k: number, step: number, offset: number): number {
  const reciprocal = Math.round(1 / step);
  return offset + (isReciprocal(step, reciprocal) ? k / reciprocal : k * step);
}

function isReciprocal(step: number, reciprocal: number): boolean {
  return reciprocal >= 1 && Math.abs(1 / step - reciprocal) <= RECIPROCAL_TOLERANCE;
}
