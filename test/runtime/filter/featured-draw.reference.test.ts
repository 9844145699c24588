/** Drawn features against the exact Gaussian kernel, within the published bound. */
import { describe, expect, test } from 'vitest';
import { drawFeatures, scaledFeatures } from '../../../runtime/filter/featured-draw.ts';

const TURN = 2 * Math.PI;

function featuresAt(draw: ReturnType<typeof drawFeatures>, point: readonly number[]): Float64Array {
  const D = draw.phases.length;
  return Float64Array.from({ length: D }, (_, j) => {
    let turns = draw.phases[j];
    for (let k = 0; k < point.length; k++) turns += draw.frequencies[j * point.length + k] * point[k];
    return Math.sqrt(2 / D) * Math.cos(TURN * turns);
  });
}

const dot = (a: Float64Array, b: Float64Array): number => a.reduce((sum, value, k) => sum + value * b[k], 0);

function largestError(draw: ReturnType<typeof drawFeatures>, points: readonly (readonly number[])[]): number {
  const at = points.map((point) => featuresAt(draw, point));
  let largest = 0;
  points.forEach((a, i) => {
    points.forEach((b, j) => {
      const square = a.reduce((sum, value, k) => sum + (value - b[k]) ** 2, 0);
      largest = Math.max(largest, Math.abs(dot(at[i], at[j]) - Math.exp(-square / 2)));
    });
  });
  return largest;
}

const square = Array.from({ length: 81 }, (_, k) => [((k % 9) - 4) * 0.25, (Math.floor(k / 9) - 4) * 0.25]);

describe('against the Gaussian kernel', () => {
  // Rahimi and Recht (2007), claim 1: P(largest error ≥ ε) ≤ 2⁸ (σ diam / ε)² exp(−D ε² / (4 (d + 2))), σ² = d for a kernel
  // of width one. Here d = 2, diam = 2√2, D = 8192: at ε = 0.2 that is 2e-4, so the test fails by chance about never.
  test('the largest error over a square stays below the published bound', () => {
    const D = 8192;
    const epsilon = 0.2;
    const chance = 256 * ((Math.SQRT2 * 2 * Math.SQRT2) / epsilon) ** 2 * Math.exp((-D * epsilon ** 2) / 16);
    expect(chance).toBeLessThan(1e-3);
    expect(largestError(drawFeatures(1, D, 2), square)).toBeLessThan(epsilon);
  });

  test('the error falls as one over the root of the number of features', () => {
    const errorOf = (count: number): number =>
      [1, 2, 3, 4].reduce((sum, seed) => sum + largestError(drawFeatures(seed, count, 2), square) / 4, 0);
    const few = errorOf(64);
    const many = errorOf(1024);
    expect(few / many).toBeGreaterThan(2.5);
    expect(few / many).toBeLessThan(6.5);
  });

  test('a kernel of other widths', () => {
    const scaled = scaledFeatures(2, 4096, [0.5, 2]);
    const a = featuresAt(scaled, [1, 0.2]);
    const b = featuresAt(scaled, [-0.4, 0.5]);
    const exact = Math.exp(-((0.5 * 1.4) ** 2 + (2 * 0.3) ** 2) / 2);
    // Four standard errors of a mean of 4096 products.
    expect(Math.abs(dot(a, b) - exact)).toBeLessThan(4 / Math.sqrt(4096));
  });
});

describe('the draw', () => {
  test('rows of a block are orthogonal, and one by one normal', () => {
    const dims = 4;
    const { frequencies } = drawFeatures(11, 4000, dims);
    const row = (j: number): Float64Array => frequencies.subarray(j * dims, (j + 1) * dims);
    let first = 0;
    let second = 0;
    let fourth = 0;
    for (let block = 0; block < 1000; block++) {
      for (let a = 0; a < dims; a++) {
        for (let b = 0; b < a; b++) {
          expect(Math.abs(dot(row(block * dims + a), row(block * dims + b)))).toBeLessThan(1e-15);
        }
      }
    }
    for (const turns of frequencies) {
      const value = TURN * turns;
      first += value / frequencies.length;
      second += value ** 2 / frequencies.length;
      fourth += value ** 4 / frequencies.length;
    }
    // Moments 0, 1 and 3 of the standard normal; 16,000 numbers, five standard errors of each.
    expect(Math.abs(first)).toBeLessThan(0.04);
    expect(Math.abs(second - 1)).toBeLessThan(0.06);
    expect(Math.abs(fourth - 3)).toBeLessThan(0.4);
  });

  test('the same seed gives the same bits, another one others', () => {
    expect(drawFeatures(7, 20, 3)).toEqual(drawFeatures(7, 20, 3));
    expect(drawFeatures(8, 20, 3).phases).not.toEqual(drawFeatures(7, 20, 3).phases);
    // A pin, not a reference: a change of the draw would change what every bundle means.
    expect(Array.from(drawFeatures(7, 1, 1).frequencies)).toMatchInlineSnapshot(`
      [
        -0.1348707150573441,
      ]
    `);
  });
});
