/**
 * Against singular values computed elsewhere. Source: numpy 1.24.2 (LAPACK gesdd), Debian 12, python3:
 *
 *     i = np.arange(12)[:, None]; j = np.arange(7)[None, :]
 *     np.linalg.svd(((i*i*5 + j*j*7 + i*j*3) % 23 - 11).astype(float))
 */
import { describe, expect, it } from 'vitest';
import { IncrementalSvd } from '../../../trainer/wide/incremental-svd.ts';

const VALUES = [
  35.602264511327775, 28.450632304032215, 26.158589925582483, 19.99702383730674, 18.2062908300388, 13.749971679992175,
  8.90824039488545,
];
const FIRST = [
  0.5488166325782246, 0.37983541652726605, 0.346026479700212, -0.013089161678825012, -0.13634801818810055,
  0.3306401866437654, -0.5538104317022514,
];

describe('singular values of a fixed matrix', () => {
  it.each([1, 3, 12])('are those of numpy, in blocks of %i', (blockRows) => {
    const svd = new IncrementalSvd({ columns: 7, rank: 7, blockRows });
    for (let i = 0; i < 12; i++) {
      svd.push(Array.from({ length: 7 }, (_, j) => ((i * i * 5 + j * j * 7 + i * j * 3) % 23) - 11));
    }
    const { singularValues, basis, rank } = svd.factors();
    expect(rank).toBe(7);
    // The small problem is one of squares: 1e-16 of the largest square is 1e-13 of the smallest value here.
    for (const [k, value] of VALUES.entries())
      expect(Math.abs(singularValues[k] - value)).toBeLessThan(1e-12 * VALUES[0]);
    const sign = Math.sign(basis[0] * FIRST[0]);
    for (const [j, entry] of FIRST.entries()) expect(Math.abs(sign * basis[j] - entry)).toBeLessThan(1e-11);
  });
});
