/**
 * Powers of two that bring every feature's standard deviation into [0.7, 1.42], so that one scale a row serves all
 * columns of the int8 bottleneck. Without it a slow mean and a fast one share a row's scale and the small one is lost.
 */

/** The int8 exponent can hold more; beyond these a feature is silent or the history is not in sensible units. */
const LEAST_EXPONENT = -40;
const GREATEST_EXPONENT = 40;

/**
 * Exponent e of each feature: 2^e times its standard deviation is as near to 1 as powers of two allow.
 *
 * shapes  covariance (p × p), result (p)
 * units   standardised
 * throws  nothing; a silent feature gets exponent 0
 * source  rounding log2
 * cost    O(p)
 */
export function featureExponents(covariance: Float64Array, p: number): Int8Array {
  const out = new Int8Array(p);
  for (let f = 0; f < p; f++) {
    const sd = Math.sqrt(covariance[f * p + f]);
    if (!(sd > 0)) continue;
    out[f] = Math.max(LEAST_EXPONENT, Math.min(GREATEST_EXPONENT, Math.round(-Math.log2(sd))));
  }
  return out;
}
