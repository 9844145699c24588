/**
 * Student's t with six degrees of freedom, the shape of every predictor's error here: near a normal in the middle,
 * forgiving in the tails, and its distribution function is algebraic (only × ÷ √), hence the same bits everywhere.
 */

const FREEDOM = 6;

/**
 * P(T > x) for Student's t with 6 degrees of freedom, to full relative precision in both tails.
 *
 * With y = x / √(6 + x²), the closed form for even degrees (Abramowitz and Stegun 1964, 26.7.4) is
 * 1/2 - y/2 (1 + c/2 + 3c²/8), c = 1 - y²; it factors as (1 - y)³ (8 + 9y + 3y²) / 16, which does not cancel.
 */
export function upperTail(x: number): number {
  const size = x < 0 ? -x : x;
  const square = FREEDOM + size * size;
  const y = size / Math.sqrt(square);
  const rest = FREEDOM / (square * (1 + y));
  const tail = (rest * rest * rest * (8 + y * (9 + 3 * y))) / 16;
  return x < 0 ? 1 - tail : tail;
}
