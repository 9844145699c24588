/**
 * Cosine and sine of many phases at once. Phases are in turns, so that taking whole turns away is exact; both waves come
 * from one polynomial on a quarter turn to either side of 0.
 */

/** sin 2πu on |u| ≤ 1/4 as u times a polynomial of u², made for the least greatest error, 3.4·10⁻⁹ (exchange by reweighted least squares). */
const S1 = 6.283185160087803;
const S3 = -41.3416550309889;
const S5 = 81.60100404460388;
const S7 = -76.54978159600614;
const S9 = 39.536700492099044;

/**
 * Writes size·cos and size·sin of 2π times each phase.
 *
 * shapes  phases (n or more); cosines go to out[from …], sines to out[from + apart …], n of each
 * units   phases in turns
 * throws  nothing
 * source  minimax polynomial, above; rounded once to single precision, so that the error of a wave is at most 6·10⁻⁸ of
 *         size beyond what the rounding of its phase brings (2π · phase · 6·10⁻⁸)
 * cost    some 20 operations a pair
 */
export function writeWaves(
  phases: Float32Array,
  n: number,
  size: number,
  out: Float32Array,
  from: number,
  apart: number,
): void {
  for (let k = 0; k < n; k++) {
    const phase = phases[k];
    const r = phase - Math.floor(phase + 0.5);
    const far = Math.abs(r);
    const c = 0.25 - far;
    // Beyond a quarter turn the sine comes back the way it went.
    const s = far > 0.25 ? (r < 0 ? -0.5 - r : 0.5 - r) : r;
    const cc = c * c;
    const ss = s * s;
    out[from + k] = size * c * (S1 + cc * (S3 + cc * (S5 + cc * (S7 + cc * S9))));
    out[from + apart + k] = size * s * (S1 + ss * (S3 + ss * (S5 + ss * (S7 + ss * S9))));
  }
}
