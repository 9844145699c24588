/**
 * How far random features stray from the Gaussian kernel they stand for, as the literature has it: what a count of features
 * promises before any is drawn, and what the tests and the bench hold the maps against.
 */

/**
 * Variance of z(x)·z(y) with independent frequencies, a cosine and a sine for each.
 *
 * shapes  kernel k(x, y) in (0, 1]; outputs counts cosines and sines
 * units   of the kernel, squared
 * throws  nothing
 * source  Sutherland and Schneider, On the Error of Random Fourier Features (2015), section 2: (1 + k(2Δ) − 2 k(Δ)²) / D, and
 *         for a Gaussian kernel k(2Δ) = k(Δ)⁴; with a random offset instead of the sine it is (1 + k(2Δ)/2 − k(Δ)²) / D
 * cost    O(1)
 */
export function independentVariance(kernel: number, outputs: number): number {
  return (1 - kernel * kernel) ** 2 / outputs;
}

/**
 * The same with frequencies in orthogonal blocks, each with a normal vector's length.
 *
 * shapes  distance |x − y| / width; dimensions of the blocks
 * units   of the kernel, squared
 * throws  nothing
 * source  Yu et al. (2016), section 3, and Choromanski et al., The Geometry of Random Features (2018), exact: two orthogonal
 *         frequencies a, b of independent lengths have cos a·cos b = mean of cos of (a ± b), each a random direction with
 *         the length of 2n normal numbers, so that E cos = Σ (−1)ʲ Δ²ʲ E[R²ʲ] E[u²ʲ] / (2j)!, summed here
 * cost    some tens of terms
 */
export function orthogonalVariance(distance: number, outputs: number, dimensions: number): number {
  const kernel = Math.exp((-distance * distance) / 2);
  const pairs = outputs / 2;
  const inBlock = Math.min(pairs, dimensions);
  const together = jointCosine(distance, dimensions) - kernel * kernel;
  // Of all ordered couples of frequencies these stand in one block; the others are independent.
  const couples = couplesInBlocks(pairs, inBlock);
  return independentVariance(kernel, outputs) + (couples * together) / (pairs * pairs);
}

function couplesInBlocks(pairs: number, size: number): number {
  const whole = Math.floor(pairs / size);
  const rest = pairs - whole * size;
  return whole * size * (size - 1) + rest * (rest - 1);
}

/** E[cos a·Δ cos b·Δ] of two orthogonal frequencies. */
function jointCosine(distance: number, n: number): number {
  const square = distance * distance;
  let term = 1;
  let sum = 1;
  for (let j = 1; Math.abs(term) > 1e-17 * Math.abs(sum) || j < 4; j++) {
    // E[R²ʲ] gains (2n + 2j − 2), E[u²ʲ] gains (2j − 1)/(n + 2j − 2), (2j)! gains 2j (2j − 1).
    term *= (-square * (2 * n + 2 * j - 2)) / ((n + 2 * j - 2) * 2 * j);
    sum += term;
  }
  return sum;
}

/**
 * Chance, at most, that somewhere in a region the kernel is missed by more than ε.
 *
 * shapes  dimensions d of the region, its diameter in widths, D outputs
 * units   ε of the kernel
 * throws  nothing
 * source  Rahimi and Recht (2007), claim 1: 2⁸ (σ diam / ε)² exp(−D ε² / (4 (d + 2))), σ² = d / width² the second moment of
 *         the frequencies, for D independent cosines with random offsets
 * cost    O(1)
 */
export function uniformBound(dimensions: number, diameter: number, outputs: number, error: number): number {
  const reach = (Math.sqrt(dimensions) * diameter) / error;
  return 256 * reach * reach * Math.exp((-outputs * error * error) / (4 * (dimensions + 2)));
}
