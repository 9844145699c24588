/**
 * Random signs as the bit that they are: a number changes its sign by one exclusive or, in a third of the time of a product.
 */
import type { Random } from './random.ts';

/** The sign bit of a single-precision number (IEEE 754-2019, section 3.4). */
const SIGN_BIT = 1 << 31;

/** As many masks: 0, or the sign bit. */
export function drawSigns(random: Random, count: number): Int32Array {
  return Int32Array.from({ length: count }, () => (random.sign() < 0 ? SIGN_BIT : 0));
}

/** Gives numbers [0, n), seen as their bits, the signs from `at` on. */
export function flipSigns(bits: Int32Array, signs: Int32Array, at: number, n: number): void {
  for (let k = 0; k < n; k++) bits[k] ^= signs[at + k];
}

/** Copies numbers [at, at + n) of x to the front of a workspace, with the signs of the same places. */
export function copySigned(
  x: ArrayLike<number>,
  signs: Int32Array,
  at: number,
  n: number,
  to: { readonly numbers: Float32Array; readonly bits: Int32Array },
): void {
  const { numbers, bits } = to;
  if (x instanceof Float32Array) {
    const given = new Int32Array(x.buffer, x.byteOffset, x.length);
    for (let k = 0; k < n; k++) bits[k] = given[at + k] ^ signs[at + k];
    return;
  }
  for (let k = 0; k < n; k++) numbers[k] = x[at + k];
  flipSigns(bits, signs, at, n);
}
