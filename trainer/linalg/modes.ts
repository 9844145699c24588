/**
 * A linear recursion taken apart into modes: real poles, and complex ones as pairs of numbers (u, v) of which u + iv is
 * multiplied by the pole. Its matrix has blocks of 1 × 1 and 2 × 2 on the diagonal, so a step costs as many products as
 * there are numbers, twice that for pairs, and its stability can be read off.
 */

/**
 * Poles, and where each one's numbers stand.
 *
 * shapes  one entry a mode; modes cover 0 … size − 1 without overlap, a complex one takes `first` and `first + 1`
 * units   per tick
 */
export interface Modes {
  readonly size: number;
  readonly first: Int32Array;
  readonly isComplex: Uint8Array;
  readonly re: Float64Array;
  readonly im: Float64Array;
}

/**
 * The modes of the transposed matrix: complex poles conjugated.
 *
 * shapes  as Modes
 * units   per tick
 * throws  nothing
 * source  the transpose of a rotation turns backwards
 * cost    trivial
 */
export function transposeModes(modes: Modes): Modes {
  return { ...modes, im: modes.im.map((value) => -value) };
}

/**
 * The product A X of the modes' matrix with X.
 *
 * shapes  x (size × m), result likewise
 * units   as x's
 * throws  nothing
 * source  definition
 * cost    O(size m)
 */
export function applyModes(modes: Modes, x: Float64Array, m: number): Float64Array {
  const out = new Float64Array(x.length);
  for (let k = 0; k < modes.re.length; k++) {
    const { re, im } = { re: modes.re[k], im: modes.im[k] };
    const u = modes.first[k] * m;
    if (modes.isComplex[k] === 0) {
      for (let j = u; j < u + m; j++) out[j] = re * x[j];
      continue;
    }
    for (let j = u; j < u + m; j++) {
      out[j] = re * x[j] - im * x[j + m];
      out[j + m] = re * x[j + m] + im * x[j];
    }
  }
  return out;
}

/**
 * One step of the modes' recursion, s ← A s, in place.
 *
 * shapes  s (size)
 * units   as s's
 * throws  nothing
 * source  definition
 * cost    O(size); allocates nothing
 */
export function stepModes(modes: Modes, s: Float64Array): void {
  const { first, isComplex, re, im } = modes;
  for (let k = 0; k < re.length; k++) {
    const at = first[k];
    if (isComplex[k] === 0) {
      s[at] *= re[k];
      continue;
    }
    const u = s[at];
    const v = s[at + 1];
    s[at] = re[k] * u - im[k] * v;
    s[at + 1] = re[k] * v + im[k] * u;
  }
}

/**
 * Largest modulus of the poles: the spectral radius. 0 without modes.
 *
 * shapes  none
 * units   per tick
 * throws  nothing
 * source  definition
 * cost    trivial
 */
export function spectralRadius({ re, im }: Modes): number {
  let largest = 0;
  for (let k = 0; k < re.length; k++) largest = Math.max(largest, Math.hypot(re[k], im[k]));
  return largest;
}
