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
  const { cos, sin } = turnsOf(n);
  reorder(re, im);
  for (let half = 1; half < n; half *= 2) {
    for (let k = 0; k < half; k++) {
      const c = cos[half + k];
      const s = sin[half + k];
      for (let a = k; a < n; a += 2 * half) {
        const b = a + half;
        const xr = re[b] * c - im[b] * s;
        const xi = re[b] * s + im[b] * c;
        re[b] = re[a] - xr;
        im[b] = im[a] - xi;
        re[a] += xr;
        im[a] += xi;
      }
    }
  }
}

interface Turns {
  readonly n: number;
  /** (n) entry half + k: of the angle -πk / half, half a power of two, k < half. */
  readonly cos: Float64Array;
  readonly sin: Float64Array;
}

/** Kept while transforms of one length follow each other. */
let held: Turns | null = null;

function turnsOf(n: number): Turns {
  if (held?.n === n) return held;
  const cos = new Float64Array(n);
  const sin = new Float64Array(n);
  for (let half = 1; half < n; half *= 2) {
    for (let k = 0; k < half; k++) {
      const angle = (-Math.PI * k) / half;
      cos[half + k] = Math.cos(angle);
      sin[half + k] = Math.sin(angle);
    }
  }
  held = { n, cos, sin };
  return held;
}

/** Bit reversal. */
function reorder(re: Float64Array, im: Float64Array): void {
  const n = re.length;
  for (let i = 1, j = 0; i < n; i++) {
    let bit = n >> 1;
    for (; j & bit; bit >>= 1) j ^= bit;
    j ^= bit;
    if (i >= j) continue;
    const real = re[i];
    const imaginary = im[i];
    re[i] = re[j];
    im[i] = im[j];
    re[j] = real;
    im[j] = imaginary;
  }
}
