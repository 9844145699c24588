/**
 * Cosine by whole turns and one odd polynomial, in + and × alone, so that every machine gets the same bits; Math.cos is
 * left approximate by the language. Not for angles beyond 2^50, which have no turn left to them.
 */

const TURNS = 0.15915494309189535; // 1 / 2π
const TWO_PI = 6.283185307179586;
/** Added and taken away again, it rounds to the nearest whole number (1.5 × 2^52). */
const ROUNDING = 6755399441055744;

/**
 * Coefficients of (sin r - r) / r³ in r² on |r| <= π/2, float32: least squares weighted towards the worst error. The largest
 * error of the sine with exact arithmetic is 5e-9, in float32 1.2e-7.
 */
const [SINE_3, SINE_5, SINE_7, SINE_9] = [
  -0.16666656732559204, 0.008333017118275166, -0.00019806614727713168, 2.6000548132287804e-6,
] as const;

/**
 * Cosine of a float32 as a float32: cos x = sin(π/2 - |x less whole turns|). The turns are taken in float64.
 *
 * shapes  one number
 * units   radians
 * throws  nothing; NaN and infinities give NaN
 * source  Cody & Waite, Software Manual for the Elementary Functions (1980), chapter 8, with the turn in place of π
 * cost    about 20 operations; error at most 1.3e-7 for |x| up to 2^20
 */
export function cosine32(x: number): number {
  const { fround } = Math;
  const t = x * TURNS;
  const part = t - (t + ROUNDING - ROUNDING);
  const r = fround((0.25 - Math.abs(part)) * TWO_PI);
  const u = fround(r * r);
  let p = fround(SINE_9);
  p = fround(fround(p * u) + SINE_7);
  p = fround(fround(p * u) + SINE_5);
  p = fround(fround(p * u) + SINE_3);
  return fround(r + fround(r * fround(u * p)));
}
