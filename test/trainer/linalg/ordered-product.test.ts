/** Larger products in lanes: to the bit the textbook triple loop. */
import { describe, expect, test } from 'vitest';
import { addInLanes } from '../../../trainer/linalg/ordered-product.ts';
import { seededNumbers } from '../../support/models.ts';

describe.each([false, true])('left factor transposed: %s', (isTransposed) => {
  test.each([
    [4, 1250, 4],
    [31, 97, 33],
    [6, 700, 5],
    [64, 96, 40],
  ])('%i by %i by %i', (n, k, m) => {
    const next = seededNumbers(n + k);
    const [a, b, out] = [n * k, k * m, n * m].map((size) =>
      Float64Array.from({ length: size }, () => next() - 0.5),
    ) as [Float64Array, Float64Array, Float64Array];
    const expected = out.slice();
    for (let i = 0; i < n; i++) {
      for (let j = 0; j < m; j++) {
        for (let l = 0; l < k; l++) expected[i * m + j]! += a[isTransposed ? l * n + i : i * k + l]! * b[l * m + j]!;
      }
    }
    expect(addInLanes(out, a, b, n, k, m, isTransposed)).toBe(true);
    expect(out).toEqual(expected);
  });
});

test('leaves small products, and those of factors too short, as they are', () => {
  const [a, b, out] = [new Float64Array(16).fill(1), new Float64Array(16).fill(1), new Float64Array(16)];
  expect(addInLanes(out, a, b, 4, 4, 4, false)).toBe(false);
  expect(addInLanes(out, a, b, 4, 4000, 4, false)).toBe(false);
  expect(out).toEqual(new Float64Array(16));
});
