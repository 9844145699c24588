/** Maps of random features: what a caller may count on, whichever construction. */
import { describe, expect, test } from 'vitest';
import { hadamard, powerOfTwo } from '../../../trainer/wide/hadamard.ts';
import { medianWidth } from '../../../trainer/wide/kernel-width.ts';
import { normalLength, openRandom } from '../../../trainer/wide/random.ts';
import { createFeatures, FEATURE_KINDS } from '../../../trainer/wide/structured-features.ts';
import { writeWaves } from '../../../trainer/wide/waves.ts';

function normals(count: number, seed: number): Float32Array {
  const random = openRandom(seed);
  return Float32Array.from({ length: count }, () => random.normal());
}

describe.each(FEATURE_KINDS)('%s features', (kind) => {
  const shape = { inputs: 100, outputs: 300, width: 3, seed: 4 };

  test('the same seed gives the same bits, another seed another map', () => {
    const x = normals(100, 1);
    const [one, again, other] = [shape, shape, { ...shape, seed: 5 }].map((given) => {
      const out = new Float32Array(300);
      createFeatures(given, kind).apply(x, out);
      return out;
    });
    expect(again).toEqual(one);
    expect(other).not.toEqual(one);
  });

  test('a vector has product 1 with itself, whatever its size', () => {
    const map = createFeatures(shape, kind);
    for (const size of [0, 1e-3, 1, 50]) {
      const out = new Float32Array(300);
      map.apply(
        normals(100, 2).map((value) => size * value),
        out,
      );
      // cos² + sin² is 1 to the rounding of 300 single-precision squares.
      expect(out.reduce((sum, value) => sum + value * value, 0)).toBeCloseTo(1, 5);
    }
  });

  test('what an earlier vector left behind does not show', () => {
    const map = createFeatures(shape, kind);
    const fresh = createFeatures(shape, kind);
    const [out, expected] = [new Float32Array(300), new Float32Array(300)];
    map.apply(normals(100, 3), out);
    map.apply(normals(100, 6), out);
    fresh.apply(Float64Array.from(normals(100, 6)), expected);
    expect(out).toEqual(expected);
  });

  test('a shape no map can have is refused', () => {
    expect(() => createFeatures({ ...shape, outputs: 301 }, kind)).toThrow('outputs: expected an even number');
    expect(() => createFeatures({ ...shape, inputs: 0 }, kind)).toThrow('inputs: expected 1 or more');
    expect(() => createFeatures({ ...shape, width: 0 }, kind)).toThrow('width: expected more than 0');
  });
});

test('structured maps keep a few numbers a feature, plain ones as many as there are inputs', () => {
  const shape = { inputs: 1024, outputs: 8192, width: 1, seed: 1 };
  expect(createFeatures(shape, 'orthogonal').bytes).toBeLessThan(12 * 8192);
  expect(createFeatures(shape, 'fastfood').bytes).toBeLessThan(14 * 8192);
  expect(createFeatures(shape, 'plain').bytes).toBeGreaterThan(1000 * 8192);
});

describe('the transform', () => {
  test.each([1, 2, 8, 64, 512])('of %i numbers is that of its definition, and twice gives n times', (n) => {
    const x = normals(n + 3, n);
    const out = x.slice();
    hadamard(out, 3, n);
    expect(out.slice(0, 3)).toEqual(x.slice(0, 3));
    for (let i = 0; i < n; i++) {
      let sum = 0;
      for (let j = 0; j < n; j++) sum += (bits(i & j) % 2 === 0 ? 1 : -1) * x[3 + j];
      // Single precision: log2 n roundings of numbers of size √n.
      expect(Math.abs(out[3 + i] - sum)).toBeLessThan(1e-5 * Math.sqrt(n));
    }
    hadamard(out, 3, n);
    for (let i = 0; i < n; i++) expect(Math.abs(out[3 + i] / n - x[3 + i])).toBeLessThan(1e-5);
  });

  test('the power of two that holds a count', () => {
    expect([1, 2, 3, 64, 65, 76800].map(powerOfTwo)).toEqual([1, 2, 4, 64, 128, 131072]);
  });
});

function bits(value: number): number {
  return value.toString(2).replaceAll('0', '').length;
}

test('waves are cosine and sine to single precision, also of many turns', () => {
  const phases = Float32Array.from({ length: 4001 }, (_, k) => (k - 2000) / 371);
  const out = new Float32Array(2 * 4001);
  writeWaves(phases, 4001, 2, out, 0, 4001);
  phases.forEach((phase, k) => {
    expect(Math.abs(out[k] - 2 * Math.cos(2 * Math.PI * phase))).toBeLessThan(2.5e-7);
    expect(Math.abs(out[4001 + k] - 2 * Math.sin(2 * Math.PI * phase))).toBeLessThan(2.5e-7);
  });
});

test('lengths of normal vectors have the moments of the chi-squared distribution', () => {
  // Chi-squared with n degrees: mean n, variance 2n. 4000 draws: mean within 4 deviations, variance within 15 %.
  for (const n of [2, 5, 64]) {
    const random = openRandom(n);
    const squares = Array.from({ length: 4000 }, () => normalLength(random, n) ** 2);
    const mean = squares.reduce((sum, value) => sum + value, 0) / 4000;
    const variance = squares.reduce((sum, value) => sum + (value - mean) ** 2, 0) / 4000;
    expect(Math.abs(mean - n)).toBeLessThan(4 * Math.sqrt((2 * n) / 4000));
    expect(Math.abs(variance / (2 * n) - 1)).toBeLessThan(0.15);
  }
});

describe('the width of a kernel', () => {
  test('of normal vectors it is near √(2n), the usual distance between them', () => {
    expect(medianWidth(normals(300 * 50, 8), 300, 1) / Math.sqrt(2 * 50)).toBeCloseTo(1, 1);
  });

  test('is never 0, and needs two rows', () => {
    expect(medianWidth(new Float32Array(40), 10, 1)).toBe(1);
    expect(() => medianWidth(new Float32Array(4), 1, 1)).toThrow('expected 2 rows');
  });
});
