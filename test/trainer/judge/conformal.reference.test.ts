/**
 * Half-widths from calibration against what conformal prediction promises. Exchangeable errors: the chance that a new one
 * lies within the ⌈(n + 1) c⌉-th smallest of n is ⌈(n + 1) c⌉ / (n + 1), whatever their distribution (Vovk, Gammerman &
 * Shafer, Algorithmic Learning in a Random World (2005), section 2.2; Angelopoulos & Bates, arXiv 2107.07511 (2021), theorem 1).
 */
import { describe, expect, it, test } from 'vitest';
import { conformalRadius } from '../../../trainer/judge/coverage.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seededNumbers } from '../../support/models.ts';

describe('exchangeable errors', () => {
  const random = seededNumbers(31);
  const normal = gaussians(random);
  const draws: Readonly<Record<string, () => number>> = {
    normal: () => Math.abs(normal()),
    // Cauchy: no mean, let alone a variance.
    'heavy-tailed': () => Math.abs(Math.tan(Math.PI * (random() - 0.5))),
  };

  test.each(Object.keys(draws))('%s', (name) => {
    const draw = draws[name]!;
    for (const n of [9, 20, 57]) {
      const promised = Math.min(n + 1, Math.ceil((n + 1) * 0.9)) / (n + 1);
      let inside = 0;
      const rounds = 20_000;
      for (let round = 0; round < rounds; round++) {
        const radius = conformalRadius(Float64Array.from({ length: n }, draw), 0.9);
        if (draw() <= radius) inside++;
      }
      // n = 9 asks for the largest of all; standard error of 20,000 trials: 0.2 points.
      expect(Math.abs(inside / rounds - promised)).toBeLessThan(0.008);
    }
  });
});

describe('errors that repeat themselves', () => {
  // Each error is the sum of the last twenty surprises, whose size drifts: 200 of them tell as much as ten or fewer.
  const LENGTH = 200;
  const ALIKE = 20;
  const shareInside = (independent: number, drift: number): number => {
    const normal = gaussians(seededNumbers(77));
    let inside = 0;
    const rounds = 2000;
    for (let round = 0; round < rounds; round++) {
      let size = 3 * normal();
      const surprises = Float64Array.from({ length: LENGTH + 120 }, () => {
        size = 0.995 * size + 0.3 * normal();
        return Math.exp(drift * size) * normal();
      });
      const errorAt = (t: number): number =>
        Math.abs(surprises.subarray(t, t + ALIKE).reduce((sum, surprise) => sum + surprise, 0));
      const radius = conformalRadius(
        Float64Array.from({ length: LENGTH }, (_, t) => errorAt(t)),
        0.9,
        independent,
      );
      if (errorAt(LENGTH + 100) <= radius) inside++;
    }
    return inside / rounds;
  };

  it('fall outside a plain quantile too often; counting those that stand for themselves makes up for it', () => {
    // Standard error: 0.7 points.
    expect(shareInside(LENGTH, 0.3)).toBeLessThan(0.87);
    expect(shareInside(LENGTH / ALIKE, 0.3)).toBeGreaterThan(0.88);
    // Where their size does not drift the margin is not needed: it errs on the safe side.
    expect(shareInside(LENGTH / ALIKE, 0)).toBeGreaterThan(0.9);
  });
});
