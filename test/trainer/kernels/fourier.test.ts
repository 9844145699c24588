/** Transforms against the trainer's plain one, against sums by definition and published pairs. */
import { describe, expect, test } from 'vitest';
import { turn } from '../../../trainer/kernels/turns.ts';
import { fourier } from '../../../trainer/linalg/fourier.ts';
import { bits, bothKernels, fill, gap } from '../../support/kernel-modes.ts';

const BYTES = 6e6;
const LENGTHS = [1, 2, 4, 8, 16, 32, 64, 128, 1024, 2048, 16384, 32768];

describe.each(LENGTHS)('%i values', (n) => {
  // Rounding grows with the logarithm of the length (Higham 2002, section 24.1); values below one, sums below sqrt n.
  const tolerance = 1e-15 * Math.sqrt(n) * (2 + Math.log2(n));

  test('there and back, to the bit between lanes and plain numbers', () => {
    const results = bothKernels(BYTES).map((kernels) => {
      const re = fill(kernels.alloc64(n), 1);
      const im = fill(kernels.alloc64(n), 2);
      const before = [re.slice(), im.slice()] as const;
      const expected = [re.slice(), im.slice()] as const;
      fourier(...expected);
      kernels.fft(re, im, n);
      expect(gap(re, expected[0])).toBeLessThan(tolerance);
      expect(gap(im, expected[1])).toBeLessThan(tolerance);
      const there = bits(re) + bits(im);
      kernels.fft(re, im, n, true);
      expect(gap(re, before[0])).toBeLessThan(1e-14);
      expect(gap(im, before[1])).toBeLessThan(1e-14);
      return there + bits(re) + bits(im);
    });
    expect(results[0] === results[1]).toBe(true);
  });

  test('of real values, there and back', () => {
    const results = bothKernels(BYTES).map((kernels) => {
      const x = fill(kernels.alloc64(n), 3);
      const before = x.slice();
      const re = kernels.alloc64((n >> 1) + 1);
      const im = kernels.alloc64((n >> 1) + 1);
      kernels.realFft(x, re, im, n);
      expect(bits(x)).toBe(bits(before));
      const whole = [x.slice(), new Float64Array(n)] as const;
      fourier(...whole);
      expect(gap(re, whole[0].subarray(0, re.length))).toBeLessThan(tolerance);
      expect(gap(im, whole[1].subarray(0, im.length))).toBeLessThan(tolerance);
      const there = bits(re) + bits(im);
      kernels.realFftInverse(re, im, x, n);
      expect(gap(x, before)).toBeLessThan(1e-14);
      return there + bits(x);
    });
    expect(results[0] === results[1]).toBe(true);
  });
});

// Oppenheim & Schafer, Discrete-Time Signal Processing, 3rd ed. (2010), section 8.5 and table 3.1 taken on the unit circle:
// a^t over n values has the transform (1 - a^n) / (1 - a w^k), w = exp(-2πi/n).
test('a published pair: powers of a number', () => {
  const [n, a] = [256, 0.9];
  for (const kernels of bothKernels(BYTES)) {
    const x = kernels.alloc64(n).map((_, t) => a ** t);
    const [inside, re, im] = [kernels.alloc64(n), kernels.alloc64(129), kernels.alloc64(129)];
    inside.set(x);
    kernels.realFft(inside, re, im, n);
    for (let k = 0; k <= 128; k++) {
      const angle = (2 * Math.PI * k) / n;
      const [dr, di] = [1 - a * Math.cos(angle), a * Math.sin(angle)];
      const scale = (1 - a ** n) / (dr * dr + di * di);
      expect(Math.abs(re[k]! - scale * dr)).toBeLessThan(1e-13);
      expect(Math.abs(im[k]! + scale * di)).toBeLessThan(1e-13);
    }
  }
});

// The same book, example 8.1: a pulse of five ones has the transform exp(-2iφ) sin(5φ/2) / sin(φ/2), φ = 2πk/n.
test('a published pair: a pulse', () => {
  const n = 16;
  const [kernels] = bothKernels(BYTES);
  const [re, im] = [kernels.alloc64(n), kernels.alloc64(n)];
  re.fill(1, 0, 5);
  kernels.fft(re, im, n);
  for (let k = 1; k < n; k++) {
    const angle = (2 * Math.PI * k) / n;
    const size = Math.sin(2.5 * angle) / Math.sin(angle / 2);
    expect(Math.abs(re[k]! - size * Math.cos(2 * angle))).toBeLessThan(1e-14);
    expect(Math.abs(im[k]! + size * Math.sin(2 * angle))).toBeLessThan(1e-14);
  }
});

test('products of spectra are sums over lags', () => {
  const n = 32;
  for (const kernels of bothKernels(BYTES)) {
    const [x, y, lagged] = [1, 2, 3].map(() => kernels.alloc64(n)) as [Float64Array, Float64Array, Float64Array];
    fill(x.subarray(0, 20), 5);
    fill(y.subarray(0, 20), 6);
    const [ar, ai, br, bi, cr, ci] = Array.from({ length: 6 }, () => kernels.alloc64(17)) as Float64Array[];
    kernels.realFft(x, ar!, ai!, n);
    kernels.realFft(y, br!, bi!, n);
    kernels.spectraAdd(cr!, ci!, ar!, ai!, br!, bi!, 17);
    kernels.realFftInverse(cr!, ci!, lagged, n);
    for (let lag = 0; lag < 12; lag++) {
      let sum = 0;
      for (let t = 0; t + lag < 20; t++) sum += x[t]! * y[t + lag]!;
      expect(Math.abs(lagged[lag]! - sum)).toBeLessThan(1e-14);
    }
  }
});

test('turns are right to rounding, and exact at the eighths', () => {
  for (let k = 0; k < 1 << 12; k++) {
    const [cos, sin] = turn(k, 1 << 12);
    expect(Math.abs(cos - Math.cos((2 * Math.PI * k) / 4096))).toBeLessThan(8e-16);
    expect(Math.abs(sin - Math.sin((2 * Math.PI * k) / 4096))).toBeLessThan(8e-16);
  }
  expect(turn(1, 4).map(Math.abs)).toEqual([0, 1]);
  expect(turn(4, 8).map(Math.abs)).toEqual([1, 0]);
  expect(turn(1, 8)[0]).toBeCloseTo(Math.SQRT1_2, 15);
});

test('refuses a length that is no power of two', () => {
  const [kernels] = bothKernels(BYTES);
  expect(() => kernels.fft(kernels.alloc64(6), kernels.alloc64(6), 6)).toThrow(/power of two/);
  expect(() => kernels.fft(kernels.alloc64(0), kernels.alloc64(0), 0)).toThrow(/power of two/);
  expect(() => kernels.realFft(kernels.alloc64(12), kernels.alloc64(7), kernels.alloc64(7), 12)).toThrow(
    /power of two/,
  );
});
