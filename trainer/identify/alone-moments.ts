/**
 * What the moments of recursions would be were every channel to move by itself, with the changes it shows. A recursion made
 * from the readings as they are takes short cuts from one channel to another that always moves with it; when a sensor
 * fails, and moves by itself for once, it errs where the bank does not. Taken as of a stationary series, from the changes'
 * own lagged products: no pass over the readings, and no ends.
 */
import { fourier } from '../linalg/fourier.ts';
import type { ModalRecursion } from '../linalg/modal.ts';
import { applyModes, type Modes, spectralRadius } from '../linalg/modes.ts';

/** A recursion with Σ s_c(t−1) Δ_c(t) of each channel c moving alone, (n × nc). */
export interface AloneRun {
  readonly recursion: ModalRecursion;
  readonly alone: Float64Array;
}

/** Lagged products reach this many times the slowest memory, and fade evenly on the way. */
const REACH = 8;

/**
 * Σ_t Δ(t) Δ(t + k), faded to nothing where the slowest pole has forgotten, and scaled so that the first is `square`.
 *
 * shapes  change (ticks); result (lags)
 * units   standardised²
 * throws  nothing
 * source  Wiener & Khinchin: the transform of the squared spectrum, padded with zeros; faded by the triangular window of
 *         Bartlett, Biometrika 37 (1950), so that they stay those of a series and no moment turns negative
 * cost    O(T log T)
 */
export function laggedProducts(change: Float64Array, modes: Modes, square: number): Float64Array {
  const reach = Math.min(change.length, Math.max(2, Math.ceil(REACH / (1 - spectralRadius(modes)))));
  let n = 2;
  while (n < change.length + reach) n *= 2;
  const re = new Float64Array(n);
  const im = new Float64Array(n);
  re.set(change);
  fourier(re, im);
  for (let k = 0; k < n; k++) {
    re[k] = re[k] * re[k] + im[k] * im[k];
    im[k] = 0;
  }
  fourier(re, im);
  const unit = re[0] > 0 ? square / re[0] : 0;
  return re.slice(0, reach).map((value, k) => value * unit * (1 - k / reach));
}

/**
 * (n × nc) Σ_j A^j b_c Σ_t Δ_c(t) Δ_c(t + j + 1), by Horner's rule from the furthest lag on.
 *
 * shapes  lagged (nc) of (lags)
 * units   standardised
 * throws  nothing
 * source  the recursion unrolled
 * cost    O(n nc lags)
 */
export function aheadAlone({ modes, drive }: ModalRecursion, lagged: readonly Float64Array[]): Float64Array {
  const nc = lagged.length;
  const out = new Float64Array(modes.size * nc);
  for (let c = 0; c < nc; c++) {
    for (let k = 0; k < modes.re.length; k++) {
      const at = modes.first[k] * nc + c;
      const isPair = modes.isComplex[k] === 1;
      const [u, v] = [drive[at], isPair ? drive[at + nc] : 0];
      if (u === 0 && v === 0) continue;
      const [re, im] = summed(lagged[c], modes.re[k], modes.im[k]);
      out[at] = re * u - im * v;
      if (isPair) out[at + nc] = re * v + im * u;
    }
  }
  return out;
}

/** Σ_j a^j products[j + 1]. */
function summed(products: Float64Array, re: number, im: number): readonly [number, number] {
  let sumRe = 0;
  let sumIm = 0;
  for (let j = products.length - 1; j >= 1; j--) {
    const turned = sumRe * re - sumIm * im + products[j];
    sumIm = sumRe * im + sumIm * re;
    sumRe = turned;
  }
  return [sumRe, sumIm];
}

/**
 * Adds `share` times the right-hand side of the Stein equation for channels that move alone.
 *
 * shapes  together (nc × nc) Σ Δ Δ', its diagonal used; known (n × m)
 * units   standardised
 * throws  nothing
 * source  as for runs over the readings, a product of different channels being nothing
 * cost    O(n m nc), less where drives are zero
 */
export function addAlone(
  left: AloneRun,
  right: AloneRun,
  together: Float64Array,
  share: number,
  known: Float64Array,
): void {
  const [n, m] = [left.recursion.modes.size, right.recursion.modes.size];
  const nc = left.alone.length / n;
  const leftMoved = applyModes(left.recursion.modes, left.alone, nc);
  const rightMoved = applyModes(right.recursion.modes, right.alone, nc);
  const rightDrive = right.recursion.drive;
  for (let c = 0; c < nc; c++) {
    const square = together[c * nc + c];
    for (let k = 0; k < n; k++) {
      const ahead = share * leftMoved[k * nc + c];
      const drive = share * left.recursion.drive[k * nc + c];
      if (drive === 0 && ahead === 0) continue;
      for (let l = 0; l < m; l++) {
        const at = l * nc + c;
        known[k * m + l] += ahead * rightDrive[at] + drive * (rightMoved[at] + square * rightDrive[at]);
      }
    }
  }
}
