/** Hadamard transforms, cosines and sums along vectors. */
import { describe, expect, test } from 'vitest';
import { bits, bothKernels, fill, gap } from '../../support/kernel-modes.ts';

const BYTES = 4e6;

describe('Hadamard transform', () => {
  // Sylvester (1867): rows of the matrix of order four in natural order.
  test('of order four', () => {
    const rows = [
      [1, 1, 1, 1],
      [1, -1, 1, -1],
      [1, 1, -1, -1],
      [1, -1, -1, 1],
    ];
    for (const kernels of bothKernels(BYTES)) {
      for (const [at, row] of rows.entries()) {
        const [x, y] = [kernels.alloc64(4), kernels.alloc32(4)];
        x[at] = 1;
        y[at] = 1;
        kernels.hadamard64(x, 4);
        kernels.hadamard32(y, 4);
        expect(Array.from(x)).toEqual(row);
        expect(Array.from(y)).toEqual(row);
      }
    }
  });

  test.each([1, 2, 4, 8, 64, 128, 4096, 8192, 131072])('H H = n I for n = %i, and the bits of plain numbers', (n) => {
    const results = bothKernels(BYTES).map((kernels) => {
      const x = fill(kernels.alloc64(n), 1);
      const y = fill(kernels.alloc32(n), 2);
      const [x0, y0] = [x.slice(), y.slice()];
      kernels.hadamard64(x, n);
      kernels.hadamard32(y, n);
      const once = bits(x) + bits(y);
      kernels.hadamard64(x, n);
      kernels.hadamard32(y, n);
      // Rounding of log2 n sums, on values that grow like the square root of n.
      expect(
        gap(
          x.map((v) => v / n),
          x0,
        ),
      ).toBeLessThan(1e-15 * (2 + Math.log2(n)));
      expect(
        gap(
          y.map((v) => v / n),
          y0,
        ),
      ).toBeLessThan(4e-7 * (2 + Math.log2(n)));
      return once;
    });
    expect(results[0] === results[1]).toBe(true);
  });

  test('refuses other lengths', () => {
    const [kernels] = bothKernels(BYTES);
    expect(() => kernels.hadamard32(kernels.alloc32(12), 12)).toThrow(/power of two/);
    expect(() => kernels.hadamard64(kernels.alloc64(0), 0)).toThrow(/power of two/);
  });
});

describe('cosines', () => {
  const ERROR = 1.3e-7;

  test('within the stated error, to the bit between lanes and plain numbers', () => {
    for (const span of [1, 10, 1000, 2 ** 20]) {
      const results = bothKernels(BYTES).map((kernels) => {
        const x = fill(kernels.alloc32(10_007), span).map((v) => v * span);
        const y = kernels.alloc32(10_007);
        y.set(x);
        kernels.cosines32(y, y.length, 1);
        expect(gap(y, Float64Array.from(x, Math.cos))).toBeLessThan(ERROR);
        return bits(y);
      });
      expect(results[0] === results[1]).toBe(true);
    }
  });

  // Abramowitz & Stegun, Handbook of Mathematical Functions (1964), table 4.6; from memory.
  test('of one and a half', () => {
    const [kernels] = bothKernels(BYTES);
    const x = kernels.alloc32(3);
    x.set([1, 1.5, 0]);
    kernels.cosines32(x, 3, 2);
    expect(gap(x, [2 * 0.5403023058681397, 2 * 0.0707372016677029, 2])).toBeLessThan(2 * ERROR);
  });

  test('numbers that are none stay none, and only so many are touched', () => {
    for (const kernels of bothKernels(BYTES)) {
      const x = kernels.alloc32(4);
      x.set([Number.NaN, Number.POSITIVE_INFINITY, 1, 7]);
      kernels.cosines32(x, 3, 1);
      expect(x[0]).toBeNaN();
      expect(x[1]).toBeNaN();
      expect(x[3]).toBe(7);
    }
  });
});

test.each([0, 1, 2, 7, 8, 9, 1001])('sums along %i values', (n) => {
  const results = bothKernels(BYTES).map((kernels) => {
    const [a, b, c] = [1, 2, 3].map((seed) => fill(kernels.alloc64(n), seed)) as [
      Float64Array,
      Float64Array,
      Float64Array,
    ];
    const sum = kernels.dot(a, b, n);
    const plain = a.reduce((total, value, at) => total + value * b[at]!, 0);
    expect(Math.abs(sum - plain)).toBeLessThan(1e-13);
    kernels.axpy(a, 0.3, b, n);
    kernels.scale(c, -1.7, n);
    expect(
      gap(
        a,
        fill(new Float64Array(n), 1).map((value, at) => value + 0.3 * b[at]!),
      ),
    ).toBe(0);
    expect(
      gap(
        c,
        fill(new Float64Array(n), 3).map((value) => value * -1.7),
      ),
    ).toBe(0);
    return [sum, bits(a), bits(c)];
  });
  expect(results[0]).toEqual(results[1]);
});
