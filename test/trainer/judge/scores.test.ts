import { describe, expect, it } from 'vitest';
import { Coverage, conformalRadius } from '../../../trainer/judge/coverage.ts';
import { meanOf, Scores, skillScore } from '../../../trainer/judge/scores.ts';

describe('Scores', () => {
  it('averages by cell', () => {
    const scores = new Scores(2);
    for (const error of [1, -3, 2]) scores.add(1, error);
    expect(scores.mse()[1]).toBeCloseTo(14 / 3, 15);
    expect(scores.mae()[1]).toBe(2);
    expect(scores.bias()[1]).toBe(0);
    expect(Number.isNaN(scores.mse()[0]!)).toBe(true);
    expect(meanOf(scores.mse())).toBeCloseTo(14 / 3, 15);
  });
});

describe('skillScore', () => {
  it('is 1 - ours/theirs, and stays finite against a rival without error', () => {
    expect(skillScore(1, 4)).toBe(0.75);
    expect(skillScore(6, 4)).toBe(-0.5);
    expect(skillScore(0, 0)).toBe(0);
    expect(skillScore(1, 0)).toBe(-1);
    expect(skillScore(Number.NaN, 1)).toBeNaN();
  });
});

describe('coverage', () => {
  it('counts a reading on the bound as inside', () => {
    const coverage = new Coverage(1);
    const add = (reading: number): void =>
      coverage.addPath(0, Float64Array.of(reading), 0, Float64Array.of(1), Float64Array.of(3), 1);
    add(1);
    add(3.5);
    add(Number.NaN);
    expect(coverage.share()[0]).toBe(0.5);
    expect(coverage.width()[0]).toBe(2);
  });

  it('takes the ceil((n + 1) coverage)-th smallest error as radius', () => {
    const sizes = Float64Array.from({ length: 19 }, (_, k) => 19 - k);
    expect(conformalRadius(sizes, 0.9)).toBe(18);
    expect(conformalRadius(Float64Array.of(2, 1), 0.9)).toBe(2);
  });
});
