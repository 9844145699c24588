/**
 * Random Fourier features against published formulas, by seeded trials: Rahimi and Recht (2007), claim 1; Sutherland and
 * Schneider (2015), variance of pairs; Choromanski et al. (2018), variance of orthogonal frequencies.
 */
import { describe, expect, test } from 'vitest';
import { independentVariance, orthogonalVariance, uniformBound } from '../../../trainer/wide/kernel-error.ts';
import { openRandom } from '../../../trainer/wide/random.ts';
import { createFeatures, type FeatureKind } from '../../../trainer/wide/structured-features.ts';

const INPUTS = 64;

/** A vector of the given length in a random direction. */
function direction(seed: number, length: number, inputs = INPUTS): Float32Array {
  const random = openRandom(seed, 9);
  const v = Float32Array.from({ length: inputs }, () => random.normal());
  const size = Math.hypot(...v);
  return v.map((value) => (value * length) / size);
}

/** Errors z(x)·z(0) − k over maps of many seeds, each of one random difference of the given length. */
function errorsOf(kind: FeatureKind, outputs: number, distance: number, trials: number, inputs = INPUTS): number[] {
  const a = new Float32Array(outputs);
  const b = new Float32Array(outputs);
  return Array.from({ length: trials }, (_, seed) => {
    const map = createFeatures({ inputs, outputs, width: 1, seed: seed + 1 }, kind);
    map.apply(direction(seed, distance, inputs), a);
    map.apply(new Float32Array(inputs), b);
    return a.reduce((sum, value, j) => sum + value * b[j], 0) - Math.exp((-distance * distance) / 2);
  });
}

const meanOf = (values: readonly number[]): number => values.reduce((sum, value) => sum + value, 0) / values.length;
const varianceOf = (errors: readonly number[]): number => meanOf(errors.map((error) => error * error));

describe('mean and variance of the kernel, 600 maps of 128 features, 64 inputs', () => {
  const TRIALS = 600;
  // A variance of 600 nearly normal errors has a relative deviation of √(2/600) = 5.8 %: 3.9 of them, two-sided 99.99 %.
  const TOLERANCE = 3.9 * Math.sqrt(2 / TRIALS);

  test.each([0.7, 1.2, 2])(
    'independent frequencies have the variance of Sutherland and Schneider, distance %f',
    (distance) => {
      const errors = errorsOf('plain', 128, distance, TRIALS);
      const expected = independentVariance(Math.exp((-distance * distance) / 2), 128);
      expect(Math.abs(meanOf(errors))).toBeLessThan(3.9 * Math.sqrt(expected / TRIALS));
      expect(Math.abs(varianceOf(errors) / expected - 1)).toBeLessThan(TOLERANCE);
    },
  );

  test.each([1.2, 2, 2.5])('orthogonal ones have that of Choromanski et al., distance %f', (distance) => {
    const errors = errorsOf('orthogonal', 128, distance, TRIALS);
    const expected = orthogonalVariance(distance, 128, 64);
    expect(Math.abs(meanOf(errors))).toBeLessThan(3.9 * Math.sqrt(expected / TRIALS));
    // The structured rotation is not quite a uniform one: the variance may stray by a tenth more (measured: within 6 %).
    expect(Math.abs(varianceOf(errors) / expected - 1)).toBeLessThan(TOLERANCE + 0.1);
    expect(varianceOf(errors)).toBeLessThan(independentVariance(Math.exp((-distance * distance) / 2), 128));
  });

  test.each([0.7, 1.2, 2])('Fastfood has the right mean, and a variance within its bound, distance %f', (distance) => {
    const errors = errorsOf('fastfood', 128, distance, TRIALS);
    const plain = independentVariance(Math.exp((-distance * distance) / 2), 128);
    // Le et al. (2013), theorem on the variance (from memory): what dependence adds to a block of n is at most C / n,
    // C = 6 Δ⁴ (exp(−Δ²) + Δ²/3).
    const added = (6 * distance ** 4 * (Math.exp(-distance * distance) + distance ** 2 / 3)) / INPUTS;
    expect(Math.abs(meanOf(errors))).toBeLessThan(3.9 * Math.sqrt((plain + added) / TRIALS));
    expect(varianceOf(errors)).toBeLessThan(plain + added);
    // Measured: up to twice the variance of independent frequencies where vectors are near, about as much where they are far.
    expect(varianceOf(errors)).toBeLessThan(2.2 * plain);
  });

  test('the check itself would see another kernel', () => {
    const wrong = errorsOf('plain', 128, 1.2, TRIALS).map((error) => error + 0.02);
    expect(Math.abs(meanOf(wrong))).toBeGreaterThan(
      3.9 * Math.sqrt(independentVariance(Math.exp(-0.72), 128) / TRIALS),
    );
  });
});

describe('the greatest error over a ball, Rahimi and Recht (2007), claim 1', () => {
  const DIMENSIONS = 4;
  const OUTPUTS = 8192;
  // The kernel depends on differences alone: those within a ball of diameter 2 are at most 2 long.
  const DIAMETER = 2;

  test.each(['plain', 'fastfood', 'orthogonal'] as const)('%s features stay within it', (kind) => {
    const error = 0.24;
    // The bound says that less than one map in a thousand errs by more anywhere; 30 maps are tried at 100 differences each.
    expect(uniformBound(DIMENSIONS, DIAMETER, OUTPUTS, error)).toBeLessThan(1e-3);
    const worst = Math.max(...worstErrors(kind, OUTPUTS, 30, 100));
    expect(worst).toBeLessThan(error);
    expect(worst).toBeGreaterThan(0.001);
  });

  test.each(['plain', 'fastfood', 'orthogonal'] as const)(
    '%s features: it falls as one over the root of their count',
    (kind) => {
      // 16 times as many: a fourth of the error; the mean square of the greatest errors of 20 maps strays by some 15 %.
      const meanSquare = (outputs: number): number =>
        meanOf(worstErrors(kind, outputs, 20, 100).map((one) => one * one));
      const ratio = Math.sqrt(meanSquare(512) / meanSquare(OUTPUTS));
      expect(ratio).toBeGreaterThan(2.8);
      expect(ratio).toBeLessThan(5.7);
    },
  );

  /** The greatest error of each of several maps, at random differences within the ball. */
  function worstErrors(kind: FeatureKind, outputs: number, maps: number, differences: number): number[] {
    const a = new Float32Array(outputs);
    const random = openRandom(5);
    return Array.from({ length: maps }, (_, seed) => {
      const map = createFeatures({ inputs: DIMENSIONS, outputs, width: 1, seed }, kind);
      let worst = 0;
      for (let trial = 0; trial < differences; trial++) {
        const length = DIAMETER * random.uniform();
        map.apply(direction(1000 * seed + trial, length, DIMENSIONS), a);
        // z(0) is √(1/pairs) in every cosine and 0 in every sine.
        let product = 0;
        for (let j = 0; j < outputs / 2; j++) product += a[j] * Math.sqrt(2 / outputs);
        worst = Math.max(worst, Math.abs(product - Math.exp((-length * length) / 2)));
      }
      return worst;
    });
  }
});
