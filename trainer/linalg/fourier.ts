/**
 * The discrete Fourier transform for lengths that are powers of two; enough for a periodogram. Not for other lengths.
 */

/**
 * Transforms in place, X_k = Σ x_t exp(-2πi kt/n).
 *
 * shapes  re, im (n), n a power of two
 * units   as the input's
 * throws  RangeError for any other length
 * source  Cooley & Tukey, Mathematics of Computation 19 (1965), decimation in time
 * cost    O(n log n)
 */
export function fourier(re: Float64Array, im: Float64Array): void {
  const n = re.length;
  if (n === 0 || (n & (n - 1)) !== 0 || im.length !== n) throw new RangeError(`Length ${n} is not a power of two.`);
  reorder(re, im);
  for (let half = 1; half < n; half *= 2) {
    for (let k = 0; k < half; k++) {
      const angle = (-Math.PI * k) / half;
      const cos = Math.cos(angle);
      const sin = Math.sin(angle);
      for (let a = k; a < n; a += 2 * half) {
        const b = a + half;
        const xr = re[b] * cos - im[b] * sin;
        const xi = re[b] * sin + im[b] * cos;
        re[b] = re[a] - xr;
        im[b] = im[a] - xi;
        re[a] += xr;
        im[a] += xi;
      }
    }
  }
}

/** Bit reversal. */
function reorder(re: Float64Array, im: Float64Array): void {
  const n = re.length;
  for (let i = 1, j = 0; i < n; i++) {
    let bit = n >> 1;
    for (; j & bit; bit >>= 1) j ^= bit;
    j ^= bit;
    if (i >= j) continue;
    [re[i], re[j]] = [re[j], re[i]];
    [im[i], im[j]] = [im[j], im[i]];
  }
}
