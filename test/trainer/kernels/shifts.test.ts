/** Products at many distances and features carried forward: to the bit plain loops over time, in both modes. */
import { describe, expect, test } from 'vitest';
import { bits, bothKernels, fill } from '../../support/kernel-modes.ts';

const BYTES = 1e6;

describe('products at many distances', () => {
  test.each([
    [0, 3],
    [4, 1],
    [8, 4],
    [64, 7],
    [256, 33],
  ])('over %i ticks at %i distances', (n, shifts) => {
    for (const kernels of bothKernels(BYTES)) {
      const a = fill(kernels.alloc64(n), 1);
      const b = fill(kernels.alloc64(n + shifts), 2);
      const sums = fill(kernels.alloc64(4 * shifts), 3);
      const expected = sums.slice();
      for (let k = 0; k < shifts; k++) {
        for (let t = 0; t < n; t++) expected[4 * k + (t % 4)] += a[t] * b[t + k];
      }
      kernels.shiftedDotsAdd(sums, a, b, n, shifts);
      expect(bits(sums)).toBe(bits(expected));
    }
  });

  test('refuses a broken four and a series too short', () => {
    const [kernels] = bothKernels(BYTES);
    const [sums, a] = [kernels.alloc64(8), kernels.alloc64(8)];
    expect(() => kernels.shiftedDotsAdd(sums, a, a, 6, 1)).toThrow(/whole number of fours/);
    expect(() => kernels.shiftedDotsAdd(sums, a, a, 8, 2)).toThrow(/expected at least 9/);
  });
});

describe('products of every two rows', () => {
  test.each([
    [0, 8],
    [1, 4],
    [2, 0],
    [4, 12],
    [7, 36],
  ])('%i rows over %i ticks', (rows, n) => {
    for (const kernels of bothKernels(BYTES)) {
      const stride = n + 3;
      const x = fill(kernels.alloc64(rows * stride), 1);
      const sums = fill(kernels.alloc64(2 * rows * (rows + 1)), 2);
      const expected = sums.slice();
      for (let a = 0, pair = 0; a < rows; a++) {
        for (let b = 0; b <= a; b++, pair++) {
          for (let t = 0; t < n; t++) expected[4 * pair + (t % 4)] += x[a * stride + t] * x[b * stride + t];
        }
      }
      kernels.pairedDotsAdd(sums, x, stride, rows, n);
      expect(bits(sums)).toBe(bits(expected));
    }
  });

  test('refuses a broken four and too few numbers', () => {
    const [kernels] = bothKernels(BYTES);
    const [sums, x] = [kernels.alloc64(12), kernels.alloc64(12)];
    expect(() => kernels.pairedDotsAdd(sums, x, 6, 2, 6)).toThrow(/whole number of fours/);
    expect(() => kernels.pairedDotsAdd(sums, x, 9, 2, 4)).toThrow(/expected at least 13/);
  });
});

describe('features carried forward', () => {
  test.each([
    [1, 1],
    [3, 3],
    [4, 8],
    [3, 7],
    [0, 2],
  ])('%i real ones of %i', (real, n) => {
    for (const kernels of bothKernels(BYTES)) {
      const [steps, stride] = [5, n + 2];
      const rows = kernels.alloc64(steps * stride);
      const from = fill(kernels.alloc64(n), 1);
      const re = fill(kernels.alloc64(n), 2);
      const im = fill(kernels.alloc64(n), 3);
      const own = fill(kernels.alloc64(n), 4);
      const changes = fill(kernels.alloc64(steps), 5);
      const expected = new Float64Array(rows.length);
      let last = from.slice();
      for (let t = 0; t < steps; t++) {
        const next = last.map((f, k) => {
          const pair = k < real ? 0 : (k - real) % 2 === 0 ? im[k] * last[k + 1] : im[k] * last[k - 1];
          return re[k] * f + pair + own[k] * changes[t];
        });
        expected.set(next, t * stride);
        last = next;
      }
      kernels.carryForward(rows, stride, from, { re, im, own }, real, n, changes, steps);
      expect(Array.from(rows)).toEqual(Array.from(expected));
    }
  });

  test('refuses half a pair', () => {
    const [kernels] = bothKernels(BYTES);
    const x = kernels.alloc64(4);
    expect(() => kernels.carryForward(x, 4, x, { re: x, im: x, own: x }, 1, 4, x, 1)).toThrow(/pairs after/);
  });
});

test.each([
  [1, 1, 1],
  [4, 4, 9],
  [5, 6, 32],
  [8, 13, 3],
  [3, 8, 0],
])('products of %i by %i columns in the order of %i rows', (m, n, rows) => {
  for (const kernels of bothKernels(BYTES)) {
    const a = fill(kernels.alloc64(rows * m), 1);
    const b = fill(kernels.alloc64(rows * n), 2);
    const c = fill(kernels.alloc64(m * n), 3);
    const expected = c.slice();
    for (let t = 0; t < rows; t++) {
      for (let i = 0; i < m; i++) for (let j = 0; j < n; j++) expected[i * n + j] += a[t * m + i] * b[t * n + j];
    }
    kernels.orderedProductAdd(c, a, b, rows, m, n);
    expect(bits(c)).toBe(bits(expected));
  }
});
