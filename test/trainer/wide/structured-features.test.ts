/** Maps of random features: what a caller may count on, whichever construction. */
import { describe, expect, test } from 'vitest';
import { medianWidth } from '../../../trainer/wide/kernel-width.ts';
import { powerOfTwo } from '../../../trainer/wide/power-of-two.ts';
import { normalLength, openRandom } from '../../../trainer/wide/random.ts';
import { drawSigns, flipSigns } from '../../../trainer/wide/signs.ts';
import { createFeatures, FEATURE_KINDS } from '../../../trainer/wide/structured-features.ts';
import { workspaceOf } from '../../../trainer/wide/workspace.ts';

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

  test('is a cosine and a sine of straight lines, to single precision', () => {
    const map = createFeatures({ inputs: 64, outputs: 256, width: 4, seed: 2 }, kind);
    const crest = Math.sqrt(1 / 128);
    const out = new Float32Array(256);
    // Frequencies read off unit vectors: less than half a turn each at that width.
    const frequencies = Array.from({ length: 64 }, (_, i) => {
      map.apply(
        Float64Array.from({ length: 64 }, (_, k) => (k === i ? 1 : 0)),
        out,
      );
      return Array.from({ length: 128 }, (_, j) => Math.atan2(out[128 + j], out[j]));
    });
    const x = normals(64, 7).map((value) => 4 * value);
    map.apply(x, out);
    for (let j = 0; j < 128; j++) {
      const phase = x.reduce((sum, value, i) => sum + value * frequencies[i][j], 0);
      // Phases of some ten radians, through three transforms of six roundings each; frequencies known to 2e-7 each.
      expect(Math.abs(out[j] - crest * Math.cos(phase))).toBeLessThan(2e-5 * crest);
      expect(Math.abs(out[128 + j] - crest * Math.sin(phase))).toBeLessThan(2e-5 * crest);
    }
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

test('the power of two that holds a count', () => {
  expect([1, 2, 3, 64, 65, 76800].map(powerOfTwo)).toEqual([1, 2, 4, 64, 128, 131072]);
});

test('signs are as often minus as plus, and flip numbers exactly', () => {
  const signs = drawSigns(openRandom(3), 10_000);
  const minus = signs.reduce((sum, sign) => sum + (sign === 0 ? 0 : 1), 0);
  // Within four deviations of half.
  expect(Math.abs(minus - 5000)).toBeLessThan(200);
  const numbers = normals(10_000, 4);
  const flipped = numbers.slice();
  flipSigns(new Int32Array(flipped.buffer), signs, 0, 10_000);
  expect(flipped).toEqual(numbers.map((value, k) => (signs[k] === 0 ? value : -value)));
});

test('waves are cosine and sine to single precision, also of many turns and of part of a run', () => {
  const workspace = workspaceOf(4001);
  for (const count of [4001, 77]) {
    const phases = Float32Array.from({ length: count }, (_, k) => (k - count / 2) / 37);
    workspace.numbers.set(phases);
    const out = new Float32Array(2 * count);
    workspace.writeWaves(count, 2, out, 0, count);
    // Size 2: twice 1.3e-7 of the cosine, and the rounding of phases up to 54 radians, 54 · 6e-8 · 2.
    phases.forEach((phase, k) => {
      expect(Math.abs(out[k] - 2 * Math.cos(phase))).toBeLessThan(7e-6);
      expect(Math.abs(out[count + k] - 2 * Math.sin(phase))).toBeLessThan(7e-6);
    });
  }
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
