/**
 * Random Fourier features: cos(ω'v + b) with ω normal and b uniform over the turn approximate a Gaussian kernel (Rahimi and
 * Recht 2007). A bundle carries only their seed: the draw uses an integer generator, the normal table and + − × ÷ √, so
 * every machine draws the same bits. Frequencies come in orthogonal blocks (Yu et al. 2016), each as many as there are
 * dimensions: still normal one by one, so the kernel is the same on average, but they cover it more evenly.
 *
 * Generator: xorshift32 (Marsaglia 2003) as in probe.ts, from the seed times 2654435761 (Knuth's multiplicative hash, so
 * that neighbouring seeds are far apart), 2463534242 where that is 0, the first 16 draws thrown away. A draw x, unsigned,
 * is the uniform number (x + 1/2) / 2³² and the normal number normalQuantile of that. Order: all normal numbers, row by
 * row; then the phases.
 */
import { normalQuantile } from './normal-table.ts';

const TURN = 6.283185307179586;

/** Features as drawn, for a kernel of width one. */
export interface Draw {
  /** (D × q) turns per unit of the argument */
  readonly frequencies: Float64Array;
  /** (D) turns */
  readonly phases: Float64Array;
}

/**
 * Draws features.
 *
 * shapes  count D features of dims q arguments
 * units   turns
 * throws  nothing
 * source  Rahimi and Recht (2007), algorithm 1; Yu et al. (2016), section 3, with each row's own length instead of a
 *         second draw of lengths: length and direction of a normal vector are independent
 * cost    O(D q) quantiles and O(D q²); for set-up, not for every tick
 */
export function drawFeatures(seed: number, count: number, dims: number): Draw {
  const uniform = uniformGenerator(seed);
  const frequencies = new Float64Array(count * dims);
  for (let k = 0; k < frequencies.length; k++) frequencies[k] = normalQuantile(uniform()) / TURN;
  for (let row = 0; row < count; row++) orthogonalise(frequencies, row, row - (row % dims), dims);
  const phases = new Float64Array(count);
  for (let j = 0; j < count; j++) phases[j] = uniform();
  return { frequencies, phases };
}

/**
 * Features for a kernel of other widths, one for each argument.
 *
 * shapes  scale (q): one over the width; result as drawFeatures
 * units   turns
 * throws  nothing
 * source  k(v) = exp(−Σ (scale v)²/2): frequencies times the scale
 * cost    as drawFeatures
 */
export function scaledFeatures(seed: number, count: number, scale: ArrayLike<number>): Draw {
  const { frequencies, phases } = drawFeatures(seed, count, scale.length);
  return { frequencies: frequencies.map((frequency, k) => frequency * scale[k % scale.length]), phases };
}

/** Makes a row orthogonal to the rows of its block above it, its length kept; twice, since once leaves rounding behind. */
function orthogonalise(rows: Float64Array, row: number, first: number, dims: number): void {
  const at = row * dims;
  const before = lengthOf(rows, at, dims);
  for (let pass = 0; pass < 2; pass++) {
    for (let other = first * dims; other < at; other += dims) {
      let along = 0;
      let square = 0;
      for (let k = 0; k < dims; k++) {
        along += rows[at + k] * rows[other + k];
        square += rows[other + k] * rows[other + k];
      }
      if (!(square > 0)) continue;
      for (let k = 0; k < dims; k++) rows[at + k] -= (along / square) * rows[other + k];
    }
  }
  const after = lengthOf(rows, at, dims);
  if (!(after > 1e-9 * before)) return;
  for (let k = 0; k < dims; k++) rows[at + k] *= before / after;
}

function lengthOf(rows: Float64Array, at: number, dims: number): number {
  let square = 0;
  for (let k = 0; k < dims; k++) square += rows[at + k] * rows[at + k];
  return Math.sqrt(square);
}

function uniformGenerator(seed: number): () => number {
  let x = Math.imul(seed, 2654435761) || 2463534242 | 0;
  const next = (): number => {
    x ^= x << 13;
    x ^= x >>> 17;
    x ^= x << 5;
    return ((x >>> 0) + 0.5) / 4294967296;
  };
  for (let k = 0; k < 16; k++) next();
  return next;
}
