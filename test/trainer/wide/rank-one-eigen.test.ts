/** The problem of one outer product, held against the general one of ml-matrix. */
import { describe, expect, it } from 'vitest';
import { symmetricEigen } from '../../../trainer/linalg/eigen.ts';
import { openRandom } from '../../../trainer/wide/random.ts';
import { RankOneEigen } from '../../../trainer/wide/rank-one-eigen.ts';
import { eigenErrors } from '../../support/eigen-errors.ts';

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
      const [made, unit] = eigenErrors(own.vectors, own.values, a, n);
      const size = Math.max(1e-3, d[0], ...a.map(Math.abs));
      expect(made).toBeLessThan(1e-13 * size);
      expect(unit).toBeLessThan(1e-13);
      const { values } = symmetricEigen(a, n);
      for (let k = 0; k < n; k++) expect(Math.abs(values[k] - own.values[k])).toBeLessThan(1e-13 * size);
    }
  });
});
