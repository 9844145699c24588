/** Products against plain loops and ml-matrix, at sizes that leave tiles, strips and panels unfilled. */
import { Matrix } from 'ml-matrix';
import { describe, expect, test } from 'vitest';
import type { Numbers } from '../../../trainer/kernels/kernels.ts';
import { bits, bothKernels, fill, gap } from '../../support/kernel-modes.ts';

const BYTES = 8e6;
// [rows or k, m, n]: nought, one, odd, just over a tile (4), a panel of steps (256), of rows (64), of columns (512).
const SHAPES = [
  [0, 3, 2],
  [1, 1, 1],
  [5, 3, 7],
  [257, 6, 9],
  [300, 65, 17],
  [31, 66, 513],
  [700, 2, 1],
  [300, 19, 1],
  [300, 1, 19],
  [100, 64, 10],
] as const;

function plainTransposed(a: Numbers, b: Numbers, rows: number, m: number, n: number, c: Float64Array): Float64Array {
  for (let t = 0; t < rows; t++) {
    for (let i = 0; i < m; i++) for (let j = 0; j < n; j++) c[i * n + j] += a[t * m + i]! * b[t * n + j]!;
  }
  return c;
}

const transposed = (a: Numbers, rows: number, columns: number): Float64Array =>
  Float64Array.from({ length: rows * columns }, (_, at) => a[(at % rows) * columns + Math.floor(at / rows)]!);

describe.each(SHAPES)('rows %i, m %i, n %i', (k, m, n) => {
  const tolerance = 1e-14 * (k + 10); // rounding of k sums of numbers below one

  test('C += A B transposed on the left, in float64 and from float32', () => {
    for (const [one, other] of [
      ['alloc64', 'alloc64'],
      ['alloc32', 'alloc64'],
      ['alloc32', 'alloc32'],
    ] as const) {
      const [simd, scalar] = bothKernels(BYTES).map((kernels) => {
        const a = fill(kernels[one](k * m), 1);
        const b = fill(kernels[other](k * n), 2);
        const c = fill(kernels.alloc64(m * n), 3);
        const expected = plainTransposed(a, b, k, m, n, c.slice());
        kernels.productAdd(c, a, b, k, m, n);
        expect(gap(c, expected)).toBeLessThan(tolerance);
        return c;
      });
      expect(bits(simd!)).toBe(bits(scalar!));
    }
  });

  test('A B, A B transposed on the right, and C -= A B', () => {
    const results = bothKernels(BYTES).map((kernels) => {
      const a = fill(kernels.alloc64(m * k), 4);
      const b = fill(kernels.alloc64(k * n), 5);
      const expected = plainTransposed(transposed(a, m, k), b, k, m, n, new Float64Array(m * n));
      const c = fill(kernels.alloc64(m * n), 6);
      kernels.multiply(c, a, b, m, k, n);
      expect(gap(c, expected)).toBeLessThan(tolerance);
      const turned = kernels.alloc64(n * k);
      turned.set(transposed(b, k, n));
      const d = kernels.alloc64(m * n);
      kernels.multiplyTransposed(d, a, turned, m, k, n);
      expect(gap(d, expected)).toBeLessThan(tolerance);
      const e = fill(kernels.alloc64(m * n), 7);
      const left = e.map((value, at) => value - expected[at]!);
      kernels.multiplyTake(e, a, b, m, k, n);
      expect(gap(e, left)).toBeLessThan(tolerance);
      return [c, d, e];
    });
    expect(bits(results[0]![0]!)).toBe(bits(results[1]![0]!));
    expect(bits(results[0]![1]!)).toBe(bits(results[1]![1]!));
    expect(bits(results[0]![2]!)).toBe(bits(results[1]![2]!));
  });

  test('the Gram matrix, both triangles', () => {
    const [simd, scalar] = bothKernels(BYTES).map((kernels) => {
      const a = fill(kernels.alloc64(k * n), 8);
      const c = kernels.alloc64(n * n);
      kernels.gramAdd(c, a, k, n);
      kernels.gramAdd(c, a, k, n);
      const once = plainTransposed(a, a, k, n, n, new Float64Array(n * n));
      expect(
        gap(
          c,
          once.map((value) => 2 * value),
        ),
      ).toBeLessThan(2 * tolerance);
      return c;
    });
    expect(bits(simd!)).toBe(bits(scalar!));
  });
});

// Rows of more than 2048 columns go in runs, the last shorter.
test.each([3, 9])('a vector by %i long rows', (k) => {
  const n = 2 * 2048 + 13;
  const results = bothKernels(BYTES).map((kernels) => {
    const a = fill(kernels.alloc64(k), 11);
    const b = fill(kernels.alloc64(k * n), 12);
    const c = fill(kernels.alloc64(n), 13);
    const left = c.map((value, j) => a.reduce((sum, f, t) => sum - f * b[t * n + j]!, value));
    kernels.multiplyTake(c, a, b, 1, k, n);
    expect(gap(c, left)).toBeLessThan(1e-14);
    return bits(c);
  });
  expect(results[0] === results[1]).toBe(true);
});

test('agrees with ml-matrix 6.15.1', () => {
  const [kernels] = bothKernels(BYTES);
  const a = fill(kernels.alloc64(37 * 53), 9);
  const b = fill(kernels.alloc64(53 * 29), 10);
  const c = kernels.alloc64(37 * 29);
  kernels.multiply(c, a, b, 37, 53, 29);
  const left = Matrix.from1DArray(37, 53, Array.from(a));
  const right = Matrix.from1DArray(53, 29, Array.from(b));
  expect(gap(c, left.mmul(right).to1DArray())).toBeLessThan(1e-13);
});

test('refuses arrays of another memory and arrays that are too short', () => {
  const [kernels] = bothKernels(1e5);
  const c = kernels.alloc64(4);
  expect(() => kernels.gramAdd(c, new Float64Array(6), 3, 2)).toThrow(/alloc64/);
  expect(() => kernels.gramAdd(c, kernels.alloc64(5), 3, 2)).toThrow(/at least 6/);
  expect(() => kernels.alloc64(1e6)).toThrow(/full/);
  expect(() => kernels.alloc64(-1)).toThrow(/whole number/);
});

test('released memory is handed out again as zeros', () => {
  const [kernels] = bothKernels(1e5);
  const mark = kernels.mark();
  fill(kernels.alloc64(100), 1);
  kernels.release(mark);
  expect(Array.from(kernels.alloc64(100))).toEqual(Array(100).fill(0));
});
