/**
 * Small symmetric eigenproblems. Rosser and others, J. Research of the National Bureau of Standards 47 (1951): 8 × 8 integers
 * with a double, a nearly equal, a zero and an opposite eigenvalue; exact values ±10√10405, 510 ± 100√26, 1000 (twice), 1020, 0.
 */
import { describe, expect, test } from 'vitest';
import { eigenErrors } from '../../support/eigen-errors.ts';
import { bits, bothKernels, fill } from '../../support/kernel-modes.ts';

const rosser = [
  [611, 196, -192, 407, -8, -52, -49, 29],
  [196, 899, 113, -192, -71, -43, -8, -44],
  [-192, 113, 899, 196, 61, 49, 8, 52],
  [407, -192, 196, 611, 8, 44, 59, -23],
  [-8, -71, 61, 8, 411, -599, 208, 208],
  [-52, -43, 49, 44, -599, 411, 208, 208],
  [-49, -8, 8, 59, 208, 208, 99, -911],
  [29, -44, 52, -23, 208, 208, -911, 99],
];

describe('eigenvectors of a small symmetric matrix', () => {
  test("are those of Rosser's", () => {
    const entries = Float64Array.from(rosser.flat());
    const root = Math.sqrt(10405);
    const pair = 100 * Math.sqrt(26);
    const exact = [10 * root, 1020, 510 + pair, 1000, 1000, 510 - pair, 0, -10 * root];
    for (const kernels of bothKernels(1e5)) {
      const [z, d] = [kernels.alloc64(64), kernels.alloc64(8)];
      z.set(entries);
      expect(kernels.symmetricEigen(z, 8, d)).toBe(true);
      for (const [k, value] of exact.entries()) expect(Math.abs(d[k] - value)).toBeLessThan(1e-11);
      const [made, unit] = eigenErrors(z, d, entries, 8);
      expect(made).toBeLessThan(1e-11);
      expect(unit).toBeLessThan(1e-13);
    }
  });

  test.each([1, 2, 3, 4, 5, 17, 32, 63])('diagonalise it for n = %i, with the bits of plain numbers', (n) => {
    const results = bothKernels(1e6).map((kernels) => {
      const [z, d] = [fill(kernels.alloc64(n * n), n), kernels.alloc64(n)];
      for (let i = 0; i < n; i++) for (let j = 0; j < i; j++) z[j * n + i] = z[i * n + j];
      const entries = z.slice();
      expect(kernels.symmetricEigen(z, n, d)).toBe(true);
      const [made, unit] = eigenErrors(z, d, entries, n);
      expect(Math.max(made, unit)).toBeLessThan(1e-14 * (4 + n));
      for (let k = 1; k < n; k++) expect(d[k]).toBeLessThanOrEqual(d[k - 1]);
      return bits(z) + bits(d);
    });
    expect(results[0] === results[1]).toBe(true);
  });

  test('of zeros are the unit vectors, and of what is not finite there are none', () => {
    for (const kernels of bothKernels(1e5)) {
      const [z, d] = [kernels.alloc64(9), kernels.alloc64(3)];
      expect(kernels.symmetricEigen(z, 3, d)).toBe(true);
      expect(Array.from(z)).toEqual([1, 0, 0, 0, 1, 0, 0, 0, 1]);
      z.fill(Number.NaN);
      expect(kernels.symmetricEigen(z, 3, d)).toBe(false);
    }
  });
});
