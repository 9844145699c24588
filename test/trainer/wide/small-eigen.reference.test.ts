/**
 * Small symmetric problems against a published matrix. Rosser and others, J. Research of the National Bureau of Standards 47
 * (1951): 8 × 8 integers with a double, a nearly equal, a zero and an opposite eigenvalue; exact values ±10√10405,
 * 510 ± 100√26, 1000 (twice), 1020, 0. The problem of one outer product is held against the general one.
 */
import { describe, expect, it } from 'vitest';
import { openRandom } from '../../../trainer/wide/random.ts';
import { RankOneEigen } from '../../../trainer/wide/rank-one-eigen.ts';
import { diagonalise } from '../../../trainer/wide/small-eigen.ts';

const rosser = [
  [611, 196, -192, 407, -8, -52, -49, 29],
  [196, 899, 113, -192, -71, -43, -8, -44],
  [-192, 113, 899, 196, 61, 49, 8, 52],
  [407, -192, 196, 611, 8, 44, 59, -23],
  [-8, -71, 61, 8, 411, -599, 208, 208],
  [-52, -43, 49, 44, -599, 411, 208, 208],
  [-49, -8, 8, 59, 208, 208, 99, -911],
  [29, -44, 52, -23, 208, 208, -911, 99],
];

/** Largest entry of |Z' diag(d) Z − A| and of |Z Z' − I|. */
function errors(z: Float64Array, d: Float64Array, a: Float64Array, n: number): [number, number] {
  let made = 0;
  let unit = 0;
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < n; j++) {
      let sum = -a[i * n + j];
      let product = i === j ? -1 : 0;
      for (let k = 0; k < n; k++) {
        sum += z[k * n + i] * d[k] * z[k * n + j];
        product += z[i * n + k] * z[j * n + k];
      }
      made = Math.max(made, Math.abs(sum));
      unit = Math.max(unit, Math.abs(product));
    }
  }
  return [made, unit];
}

describe('a small symmetric problem', () => {
  it("finds Rosser's eigenvalues and vectors", () => {
    const a = Float64Array.from(rosser.flat());
    const z = a.slice();
    const d = new Float64Array(8);
    diagonalise(z, 8, d, new Float64Array(8));
    const root = Math.sqrt(10405);
    const pair = 100 * Math.sqrt(26);
    const exact = [10 * root, 1020, 510 + pair, 1000, 1000, 510 - pair, 0, -10 * root];
    for (const [k, value] of exact.entries()) expect(Math.abs(d[k] - value)).toBeLessThan(1e-11);
    const [made, unit] = errors(z, d, a, 8);
    expect(made).toBeLessThan(1e-11);
    expect(unit).toBeLessThan(1e-13);
  });
});

describe('a diagonal and one outer product', () => {
  it.each([
    ['far apart', (k: number) => 100 - 7 * k],
    ['all equal', () => 3],
    ['in pairs', (k: number) => 50 - Math.floor(k / 2)],
    ['nearly equal', (k: number) => 1 - k * 1e-12],
    ['over many sizes', (k: number) => 10 ** -k],
    ['ending in zeros', (k: number) => (k < 5 ? 9 - k : 0)],
  ])('agrees with the general solution: poles %s', (_, pole) => {
    const random = openRandom(7);
    const n = 12;
    for (let round = 0; round < 20; round++) {
      const d = Float64Array.from({ length: n }, (_, k) => pole(k));
      const z = Float64Array.from({ length: n }, () =>
        random.uniform() < 0.2 ? 0 : random.normal() * 10 ** -random.below(9),
      );
      const a = new Float64Array(n * n);
      for (let i = 0; i < n; i++) for (let j = 0; j < n; j++) a[i * n + j] = z[i] * z[j] + (i === j ? d[i] : 0);
      const own = new RankOneEigen(n);
      own.solve(d, z, n);
      const [made, unit] = errors(own.vectors, own.values, a, n);
      const size = Math.max(1e-3, d[0], ...a.map(Math.abs));
      expect(made).toBeLessThan(1e-13 * size);
      expect(unit).toBeLessThan(1e-13);
      const values = new Float64Array(n);
      diagonalise(a, n, values, new Float64Array(n));
      for (let k = 0; k < n; k++) expect(Math.abs(values[k] - own.values[k])).toBeLessThan(1e-13 * size);
    }
  });
});
