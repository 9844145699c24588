/** Sure gains against a published worked example of Student's paired test. */
import { describe, expect, it } from 'vitest';
import { type FoldWeights, gainsSurely, powerMean } from '../../../trainer/identify/fold-errors.ts';

const even = (n: number, power = 0): FoldWeights => ({ shares: new Array(n).fill(1 / n), power, doubt: 1 });

describe('gainsSurely', () => {
  // Student, Biometrika 6 (1908), section IX: hours of sleep gained by ten patients, one drug over another. Mean difference
  // 1.58 and standard deviation 1.17 (divisor n); his odds that the second is better, 666 to one, quoted from memory.
  const difference = [1.2, 2.4, 1.3, 1.3, 0, 1, 1.8, 0.8, 4.6, 1.4];

  it("finds Student's own example sure, at one in 200 even with the quantile of eight patients", () => {
    const errors = difference.map((gain) => Math.exp(-gain));
    const others = difference.map(() => 1);
    expect(gainsSurely(errors, others, 0.1, even(10), 0.005)).toBe(true);
    expect(gainsSurely(others, errors, 0, even(10), 0.1)).toBe(false);
  });

  it('is as sure as the table says: t = 2.132 at one in twenty and four degrees of freedom', () => {
    // Gains 1 ± s in pairs, one at the mean: t = 1 / (s √(4/5) / √4).
    const at = (t: number): number[] => {
      const s = 1 / (t * Math.sqrt(0.8 / 4));
      return [1 - s, 1 + s, 1, 1 + s, 1 - s].map((gain) => Math.exp(-gain));
    };
    const others = [1, 1, 1, 1, 1];
    expect(gainsSurely(at(2.14), others, 0, even(5), 0.05)).toBe(true);
    expect(gainsSurely(at(2.12), others, 0, even(5), 0.05)).toBe(false);
    expect(gainsSurely(at(2.12), others, 0, even(5), 0.1)).toBe(true);
    expect(gainsSurely(at(2.14), others, 0, { ...even(5), doubt: 1.1 }, 0.05)).toBe(false);
  });

  it('listens to the folds where much moves, by the power mean between', () => {
    const still = [0.01, 1, 1.2, 0.9];
    // Half as much again where next to nothing moves, a fifth less elsewhere.
    const errors = [0.015, 0.8, 0.97, 0.71];
    expect(gainsSurely(errors, still, 0.01, even(4))).toBe(false);
    expect(gainsSurely(errors, still, 0.01, even(4, 0.5))).toBe(true);
  });

  it('asks for the share, and a lone fold has only that to go by', () => {
    expect(gainsSurely([0.97], [1], 0.02, even(1))).toBe(true);
    expect(gainsSurely([0.99], [1], 0.02, even(1))).toBe(false);
  });
});

describe('powerMean', () => {
  it('weighs', () => {
    expect(powerMean([4, 9], even(2))).toBeCloseTo(6, 12);
    expect(powerMean([2, 8], { shares: [0.25, 0.75], power: 0 })).toBeCloseTo(2 ** 2.5, 12);
    expect(powerMean([4, 16], even(2, 0.5))).toBeCloseTo(9, 12);
    expect(powerMean([4, 16], even(2, 1))).toBeCloseTo(10, 12);
  });
});
