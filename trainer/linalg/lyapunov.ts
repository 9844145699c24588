/**
 * Discrete Lyapunov (Stein) equations X = A X B' + W for matrices given by their modes. Each pair of blocks is an equation
 * of its own: a 2 × 2 block X splits into a part that commutes with turning (multiplication by a number x) and one that
 * turns against it (multiplication of the conjugate), for which X = A X B' + W says x (1 − a b̄) = w and x (1 − a b) = w.
 * Exact but for rounding, and as quick as reading the matrices; the general solvers need a Schur form first.
 */
import type { Modes } from './modes.ts';

/**
 * Solves X = A X B' + W.
 *
 * shapes  left the modes of A (n), right those of B (m); w (n × m), result likewise
 * units   any
 * throws  nothing; poles with a b = 1 give infinities, so both must lie inside the unit circle
 * source  scalar Stein equations of a diagonal form: Jameson, SIAM J. Applied Mathematics 16 (1968), section 2; the split
 *         of real 2 × 2 blocks is elementary
 * cost    O(n m)
 */
export function solveStein(left: Modes, right: Modes, w: Float64Array): Float64Array {
  const out = new Float64Array(w.length);
  for (let k = 0; k < left.re.length; k++) {
    for (let l = 0; l < right.re.length; l++) solveBlock(left, k, right, l, w, out);
  }
  return out;
}

function solveBlock(left: Modes, k: number, right: Modes, l: number, w: Float64Array, out: Float64Array): void {
  const m = right.size;
  const at = left.first[k] * m + right.first[l];
  const [tall, wide] = [left.isComplex[k] === 1, right.isComplex[l] === 1];
  const [aRe, aIm] = [left.re[k], left.im[k]];
  const [bRe, bIm] = [right.re[l], right.im[l]];
  if (!tall && !wide) {
    out[at] = w[at] / (1 - aRe * bRe);
    return;
  }
  // A real pole is a complex one whose second number stays zero: its row or column of W is taken as zero.
  const w00 = w[at];
  const w01 = wide ? w[at + 1] : 0;
  const w10 = tall ? w[at + m] : 0;
  const w11 = tall && wide ? w[at + m + 1] : 0;
  const product = aRe * bRe;
  const turned = aIm * bIm;
  const withRe = 0.5 * (w00 + w11);
  const withIm = 0.5 * (w10 - w01);
  // 1 − a b̄
  const withDenominatorRe = 1 - (product + turned);
  const withDenominatorIm = -(aIm * bRe - aRe * bIm);
  const withSize = withDenominatorRe * withDenominatorRe + withDenominatorIm * withDenominatorIm;
  const xRe = (withRe * withDenominatorRe + withIm * withDenominatorIm) / withSize;
  const xIm = (withIm * withDenominatorRe - withRe * withDenominatorIm) / withSize;
  const againstRe = 0.5 * (w00 - w11);
  const againstIm = 0.5 * (w10 + w01);
  // 1 − a b
  const againstDenominatorRe = 1 - (product - turned);
  const againstDenominatorIm = -(aIm * bRe + aRe * bIm);
  const againstSize = againstDenominatorRe * againstDenominatorRe + againstDenominatorIm * againstDenominatorIm;
  const yRe = (againstRe * againstDenominatorRe + againstIm * againstDenominatorIm) / againstSize;
  const yIm = (againstIm * againstDenominatorRe - againstRe * againstDenominatorIm) / againstSize;
  out[at] = xRe + yRe;
  if (wide) out[at + 1] = yIm - xIm;
  if (tall) out[at + m] = xIm + yIm;
  if (tall && wide) out[at + m + 1] = xRe - yRe;
}
