/** QR of tall blocks: orthogonality and reconstruction, by products and by reflections, and a published example. */
import { Matrix, QrDecomposition } from 'ml-matrix';
import { describe, expect, test } from 'vitest';
import type { Kernels } from '../../../trainer/kernels/kernels.ts';
import { bits, bothKernels, fill, gap } from '../../support/kernel-modes.ts';

const BYTES = 4e6;

/** Largest entry of Q'Q - I. */
function departure(q: Float64Array, rows: number, n: number): number {
  let worst = 0;
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < n; j++) {
      let sum = i === j ? -1 : 0;
      for (let t = 0; t < rows; t++) sum += q[t * n + i]! * q[t * n + j]!;
      if (!(Math.abs(sum) <= worst)) worst = Math.abs(sum);
    }
  }
  return worst;
}

/** Largest entry of Q R - A. */
function misfit(q: Float64Array, r: Float64Array, a: Float64Array, rows: number, n: number): number {
  const back = new Float64Array(rows * n);
  for (let t = 0; t < rows; t++) {
    for (let j = 0; j < n; j++) {
      for (let k = 0; k <= j; k++) back[t * n + j] += q[t * n + k]! * r[k * n + j]!;
    }
  }
  return gap(back, a);
}

function factored(kernels: Kernels, a: Float64Array, rows: number, n: number): { q: Float64Array; r: Float64Array } {
  const q = kernels.alloc64(rows * n);
  q.set(a);
  const r = fill(kernels.alloc64(n * n), 99);
  kernels.qr(q, rows, n, r);
  return { q, r };
}

/** Seeded blocks: plain, of columns nearly alike, with a column twice, with one of zeros, of tiny numbers, all zero. */
const BLOCKS: Record<string, (rows: number, n: number) => Float64Array> = {
  plain: (rows, n) => fill(new Float64Array(rows * n), 1),
  'nearly dependent': (rows, n) => {
    const a = fill(new Float64Array(rows * n), 2);
    const first = Float64Array.from({ length: rows }, (_, t) => a[t * n]!);
    return a.map((value, at) => first[Math.floor(at / n)]! + 1e-9 * value);
  },
  dependent: (rows, n) => {
    const a = fill(new Float64Array(rows * n), 3);
    for (let t = 0; t < rows; t++) a[t * n + n - 1] = a[t * n]!;
    return a;
  },
  'a column of zeros': (rows, n) => fill(new Float64Array(rows * n), 4).map((value, at) => (at % n === 0 ? 0 : value)),
  tiny: (rows, n) => fill(new Float64Array(rows * n), 5).map((value) => value * 1e-200),
  zero: (rows, n) => new Float64Array(rows * n),
};

describe.each(Object.keys(BLOCKS))('%s', (name) => {
  test.each([
    [1, 1],
    [7, 7],
    [50, 3],
    [301, 33],
  ])('%i rows, %i columns', (rows, n) => {
    const a = BLOCKS[name]!(rows, n);
    const size = gap(a, new Float64Array(a.length));
    const [simd, scalar] = bothKernels(BYTES).map((kernels) => {
      const { q, r } = factored(kernels, a, rows, n);
      // A few roundings of sums of `rows` products of numbers below one.
      expect(departure(q, rows, n)).toBeLessThan(2e-14);
      expect(misfit(q, r, a, rows, n)).toBeLessThanOrEqual(1e-14 * Math.sqrt(rows * n) * size);
      for (let i = 0; i < n; i++) {
        expect(r[i * n + i]).toBeGreaterThanOrEqual(0);
        for (let j = 0; j < i; j++) expect(r[i * n + j]).toBe(0);
      }
      return bits(q) + bits(r);
    });
    expect(simd).toBe(scalar);
  });
});

test('nothing to factor, too few rows, numbers that are none', () => {
  const [kernels] = bothKernels(BYTES);
  expect(() => kernels.qr(kernels.alloc64(0), 0, 0, kernels.alloc64(0))).not.toThrow();
  expect(() => kernels.qr(kernels.alloc64(6), 2, 3, kernels.alloc64(9))).toThrow(/at least 3 rows/);
  const a = kernels.alloc64(6).fill(Number.NaN);
  expect(() => kernels.qr(a, 3, 2, kernels.alloc64(4))).toThrow(/not finite/);
});

test('agrees with ml-matrix 6.15.1 up to the signs of columns', () => {
  const [kernels] = bothKernels(BYTES);
  const a = fill(new Float64Array(40 * 6), 6);
  const { r } = factored(kernels, a, 40, 6);
  const theirs = new QrDecomposition(Matrix.from1DArray(40, 6, Array.from(a))).upperTriangularMatrix.to1DArray();
  expect(gap(r.map(Math.abs), theirs.map(Math.abs))).toBeLessThan(1e-13);
});

// "QR decomposition" in Wikipedia (2024), section "Using Householder reflections": R = (14, 21, -14; 0, 175, -70; 0, 0, ∓35).
test('the published example', () => {
  for (const kernels of bothKernels(BYTES)) {
    const { q, r } = factored(kernels, Float64Array.of(12, -51, 4, 6, 167, -68, -4, 24, -41), 3, 3);
    expect(gap(r, [14, 21, -14, 0, 175, -70, 0, 0, 35])).toBeLessThan(1e-12);
    expect(gap([q[0]!, q[3]!, q[6]!], [6 / 7, 3 / 7, -2 / 7])).toBeLessThan(1e-15);
  }
});
