/**
 * One whole number through the range coder under a channel's mixture: which side of the pivot, how far in doubling
 * strides, then halving. Each decision has the probability that the mixture gives it, so that the cost of the number is
 * -log2 of its probability (Shannon 1948), whatever the pivot and stride, which only save time.
 */
import { type BitCoder, ONE } from './coder.ts';
import { segmentError } from './limits.ts';
import type { Predictors } from './predictors.ts';

/** Strides end here; anything so far out is refused before. */
const MOST_STRIDE = 2 ** 44;

/** Codes `index` and gives it back, never as -0; a decoder ignores what it is given. */
export function codeIndex(coder: BitCoder, predictors: Predictors, index: number): number {
  const pivot = predictors.pivot;
  const above = predictors.tail(1, pivot);
  const below = predictors.tail(-1, 1 - pivot);
  if (coder.code(index >= pivot ? 1 : 0, share(above, above + below)) === 1)
    return 0 + codeOutward(coder, predictors, 1, pivot, above, index);
  return 0 - codeOutward(coder, predictors, -1, 1 - pivot, below, -index);
}

/** `index` ≥ `from`, mirrored by `sign`; `tailFrom` is the probability of that. */
function codeOutward(
  coder: BitCoder,
  predictors: Predictors,
  sign: number,
  from: number,
  tailFrom: number,
  index: number,
): number {
  let stride = 1;
  while (stride < predictors.width) stride *= 2;
  let low = from;
  let tailLow = tailFrom;
  let tailHigh = predictors.tail(sign, low + stride);
  while (coder.code(index >= low + stride ? 1 : 0, share(tailHigh, tailLow)) === 1) {
    low += stride;
    stride *= 2;
    if (stride > MOST_STRIDE) throw segmentError('segment payload: a reading lies beyond any lattice index');
    tailLow = tailHigh;
    tailHigh = predictors.tail(sign, low + stride);
  }
  while (stride > 1) {
    stride /= 2;
    const tailMiddle = predictors.tail(sign, low + stride);
    if (coder.code(index >= low + stride ? 1 : 0, share(tailMiddle - tailHigh, tailLow - tailHigh)) === 1) {
      low += stride;
      tailLow = tailMiddle;
    } else {
      tailHigh = tailMiddle;
    }
  }
  return low;
}

/** part / whole in 1/65536, kept off 0 and 1; one half where rounding leaves nothing to divide. */
function share(part: number, whole: number): number {
  if (!(whole > 0)) return ONE / 2;
  const p = Math.floor((ONE * part) / whole + 0.5);
  return p < 1 ? 1 : Math.min(p, ONE - 1);
}
