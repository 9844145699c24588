/**
 * The loss test against dm.test of R's package forecast 8.20 under R 4.2.2 (Debian r-cran-forecast), power 2, run on the
 * series made here: uniform numbers of Park & Miller's generator (Communications of the ACM 31 (1988)), which R and this
 * file make alike. To run again: dm.test(e1, e2, alternative = "less", h = h, power = 2, varestimator = "acf" or "bartlett").
 * Where the truncated variance is negative, R tests as if h were 1; ours names Bartlett's weights and takes those.
 */
import { describe, expect, it, test } from 'vitest';
import { compareLosses } from '../../../trainer/judge/diebold-mariano.ts';
import { studentCdf } from '../../../trainer/judge/student.ts';

function uniform(n: number, seed: number): Float64Array {
  let x = seed;
  return Float64Array.from({ length: n }, () => {
    x = (16_807 * x) % 2_147_483_647;
    return x / 2_147_483_647 - 0.5;
  });
}

const filtered = (u: Float64Array, weights: readonly number[]): Float64Array =>
  u.map((_, t) => weights.reduce((sum, weight, k) => sum + (t >= k ? weight * u[t - k]! : 0), 0));
const squares = (errors: Float64Array): Float64Array => errors.map((e) => e * e);
const alternating = (a: number, b: number, seed: number): Float64Array =>
  uniform(40, seed).map((u, t) => (t % 2 === 0 ? a : b) + 0.1 * u);

const single = [squares(uniform(60, 7)), squares(uniform(60, 11).map((e) => 1.3 * e))] as const;
const moving = [
  squares(filtered(uniform(200, 3), [1, 1, 1, 1, 1, 1])),
  squares(filtered(uniform(200, 5), [1.2, 1.1, 1, 1, 1, 1])),
] as const;
const swinging = [squares(alternating(1, 2, 13)), squares(alternating(2, 1.1, 17))] as const;

describe('compareLosses against dm.test', () => {
  test.each([
    ['one step', single, 1, 'truncated', -4.37590679078071, 2.50182230725928e-5],
    ['six steps', moving, 6, 'truncated', 0.176037749013874, 0.569778351996261],
    ['negative truncated variance', swinging, 2, 'Bartlett', -0.884677035901093, 0.190876360574066],
  ] as const)('%s', (_, [first, second], horizon, variance, statistic, p) => {
    const said = compareLosses(first, second, horizon)!;
    // Both sides compute in float64; their orders of summation differ.
    expect(said.statistic).toBeCloseTo(statistic, 11);
    expect(said.pBetter).toBeCloseTo(p, 11);
    expect(said.pBetter + said.pWorse).toBeCloseTo(1, 12);
    expect(said.variance).toBe(variance);
    const back = compareLosses(second, first, horizon)!;
    expect(back.statistic).toBeCloseTo(-statistic, 11);
  });

  it('says nothing of too few origins or of equal losses', () => {
    expect(compareLosses(single[0].subarray(0, 5), single[1].subarray(0, 5), 3)).toBeNull();
    expect(compareLosses(single[0], single[0], 2)).toBeNull();
  });

  it('passes over origins without a loss', () => {
    const [first, second] = single.map((losses) => {
      const gapped = new Float64Array(70).fill(Number.NaN);
      gapped.set(losses.subarray(0, 30), 0);
      gapped.set(losses.subarray(30), 40);
      return gapped;
    });
    expect(compareLosses(first!, second!, 1)!.statistic).toBeCloseTo(-4.37590679078071, 11);
  });
});

// R 4.2.2: pt(t, df).
test.each([
  [-2, 3, 0.0696629842794216],
  [-1.5, 29, 0.0722118480201928],
  [-0.3, 10, 0.385160303782899],
  [-4, 2879, 3.24685143201073e-5],
  [-12, 5, 3.54474625858076e-5],
  [1.2, 1, 0.778857938376305],
  [-2.75, 30, 0.00499994726346559],
])('studentCdf(%d, %d)', (t, freedom, p) => {
  expect(Math.abs(studentCdf(t, freedom) - p)).toBeLessThan(1e-12);
  expect(studentCdf(-t, freedom)).toBeCloseTo(1 - p, 12);
});
