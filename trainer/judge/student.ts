/**
 * Student's t distribution, for tests: by the regularised incomplete beta function, as a continued fraction.
 */

/** Coefficients of Lanczos' series for the gamma function, g = 7, n = 9, as computed by P. Godfrey (2001). */
// biome-ignore format: a table
const LANCZOS = [
  0.99999999999980993, 676.5203681218851, -1259.1392167224028, 771.32342877765313, -176.61502916214059,
  12.507343278686905, -0.13857109526572012, 9.9843695780195716e-6, 1.5056327351493116e-7,
] as const;
const MOST_TERMS = 500;
const TINY = 1e-300;

/**
 * Probability that a t variable with `freedom` degrees of freedom is at most t.
 *
 * shapes  numbers
 * units   none
 * throws  nothing; NaN gives NaN
 * source  NIST Digital Library of Mathematical Functions, 8.17.22 (continued fraction) and 8.17.4 (symmetry); Abramowitz &
 *         Stegun (1964), 26.7.1
 * cost    some tens of terms
 */
export function studentCdf(t: number, freedom: number): number {
  if (Number.isNaN(t)) return Number.NaN;
  if (!Number.isFinite(t)) return t > 0 ? 1 : 0;
  const tail = 0.5 * incompleteBeta(freedom / (freedom + t * t), freedom / 2, 0.5);
  return t > 0 ? 1 - tail : tail;
}

/** I_x(a, b), regularised. */
function incompleteBeta(x: number, a: number, b: number): number {
  if (x <= 0) return 0;
  if (x >= 1) return 1;
  // The fraction converges fast below the mean; above it the mirror image does.
  if (x > (a + 1) / (a + b + 2)) return 1 - incompleteBeta(1 - x, b, a);
  const front = Math.exp(logGamma(a + b) - logGamma(a) - logGamma(b) + a * Math.log(x) + b * Math.log1p(-x));
  return (front * fraction(x, a, b)) / a;
}

/** The continued fraction by Lentz' method as modified by Thompson and Barnett (1986). */
function fraction(x: number, a: number, b: number): number {
  const kept = (value: number): number => (Math.abs(value) < TINY ? TINY : value);
  let c = 1;
  let d = 1 / kept(1 - ((a + b) * x) / (a + 1));
  let value = d;
  for (let m = 1; m <= MOST_TERMS; m++) {
    const even = (m * (b - m) * x) / ((a + 2 * m - 1) * (a + 2 * m));
    const odd = (-(a + m) * (a + b + m) * x) / ((a + 2 * m) * (a + 2 * m + 1));
    for (const term of [even, odd]) {
      d = 1 / kept(1 + term * d);
      c = kept(1 + term / c);
      value *= c * d;
    }
    if (Math.abs(c * d - 1) < 1e-15) break;
  }
  return value;
}

/** log Γ(x) for x > 0.  */
function logGamma(x: number): number {
  if (x < 0.5) return Math.log(Math.PI / Math.sin(Math.PI * x)) - logGamma(1 - x);
  const t = x + 6.5;
  const series = LANCZOS.reduce((sum, coefficient, k) => (k === 0 ? coefficient : sum + coefficient / (x - 1 + k)), 0);
  return 0.5 * Math.log(2 * Math.PI) + (x - 0.5) * Math.log(t) - t + Math.log(series);
}
