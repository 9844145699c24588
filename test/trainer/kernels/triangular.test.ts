/** Cholesky factors and triangular solves against plain loops, the trainer's own and published examples. */
import { describe, expect, test } from 'vitest';
import { cholesky, solveLower, solveLowerTransposed } from '../../../trainer/linalg/cholesky.ts';
import { bits, bothKernels, fill, gap } from '../../support/kernel-modes.ts';

const BYTES = 4e6;
const SIZES = [0, 1, 2, 5, 31, 32, 33, 70, 129];

/** A A' + n I of a seeded A: well inside the positive definite. */
function positive(n: number): Float64Array {
  const a = fill(new Float64Array(n * n), n + 1);
  const out = new Float64Array(n * n);
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < n; j++) {
      let sum = i === j ? n : 0;
      for (let k = 0; k < n; k++) sum += a[i * n + k]! * a[j * n + k]!;
      out[i * n + j] = sum;
    }
  }
  return out;
}

describe.each(SIZES)('n = %i', (n) => {
  test('the factor agrees with the plain one, to the bit between lanes and plain numbers', () => {
    const [simd, scalar] = bothKernels(BYTES).map((kernels) => {
      const a = kernels.alloc64(n * n);
      a.set(positive(n));
      expect(kernels.cholesky(a, n)).toBe(-1);
      expect(gap(a, cholesky(positive(n), n))).toBeLessThan(1e-12);
      return a;
    });
    expect(bits(simd!)).toBe(bits(scalar!));
  });

  test.each([1, 3, 8])('solves with %i right-hand sides, below and above', (m) => {
    const factor = cholesky(positive(n), n);
    const results = bothKernels(BYTES).map((kernels) => {
      const l = kernels.alloc64(n * n);
      l.set(factor);
      const b = fill(kernels.alloc64(n * m), m);
      const expected = b.slice();
      kernels.solveLower(l, b, n, m);
      solveLower(factor, n, expected, m);
      expect(gap(b, expected)).toBeLessThan(1e-14 * (n + 1));
      const c = fill(kernels.alloc64(n * m), m + 1);
      const other = c.slice();
      kernels.solveUpper(l, c, n, m);
      solveLowerTransposed(factor, n, other, m);
      expect(gap(c, other)).toBeLessThan(1e-14 * (n + 1));
      return [b, c];
    });
    expect(bits(results[0]![0]!)).toBe(bits(results[1]![0]!));
    expect(bits(results[0]![1]!)).toBe(bits(results[1]![1]!));
  });
});

test('names the row whose pivot is not positive', () => {
  for (const kernels of bothKernels(BYTES)) {
    const a = kernels.alloc64(70 * 70);
    a.set(positive(70));
    a[50 * 70 + 50] = -1;
    expect(kernels.cholesky(a, 70)).toBe(50);
    a.fill(Number.NaN);
    expect(kernels.cholesky(a, 70)).toBe(0);
  }
});

// "Cholesky decomposition" in Wikipedia (2024), section "Example": the factor is of whole numbers.
test('the published example', () => {
  for (const kernels of bothKernels(BYTES)) {
    const a = kernels.alloc64(9);
    a.set([4, 12, -16, 12, 37, -43, -16, -43, 98]);
    kernels.cholesky(a, 3);
    expect(Array.from(a)).toEqual([2, 0, 0, 6, 1, 0, -8, 5, 3]);
  }
});
