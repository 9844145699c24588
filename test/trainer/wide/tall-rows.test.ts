/** Long rows beside plain sums, and a basis set right again. */
import { describe, expect, test } from 'vitest';
import { IncrementalSvd } from '../../../trainer/wide/incremental-svd.ts';
import { openRandom } from '../../../trainer/wide/random.ts';
import {
  measureOrthogonality,
  ORTHOGONALITY_BOUND,
  orthonormaliseRows,
} from '../../../trainer/wide/tall-orthonormal.ts';
import { TallRows } from '../../../trainer/wide/tall-rows.ts';
import { bothKernels, fill } from '../../support/kernel-modes.ts';

const [ROWS, MOST, COLUMNS] = [7, 4, 601];

describe.each([0, 1])('long rows, kernels %i', (mode) => {
  const kernels = bothKernels(TallRows.bytes(ROWS, MOST, COLUMNS) + 1e5)[mode];
  const rows = new TallRows(kernels, ROWS, MOST, COLUMNS);
  const small = kernels.alloc64(ROWS * ROWS);
  const before = Array.from({ length: ROWS }, (_, i) => fill(rows.row(i), i).slice());
  const sum = (a: Float64Array, b: Float64Array): number => a.reduce((total, value, k) => total + value * b[k], 0);

  test('products', () => {
    rows.products(1, 3, 0, 5, small);
    for (let i = 0; i < 3; i++) {
      for (let j = 0; j < 5; j++) expect(small[i * 5 + j]).toBeCloseTo(sum(before[1 + i], before[j]), 11);
    }
    rows.dots(6, 4, small);
    for (let j = 0; j < 4; j++) expect(small[j]).toBeCloseTo(sum(before[6], before[j]), 11);
    expect(rows.square(2)).toBeCloseTo(sum(before[2], before[2]), 11);
  });

  test('combinations taken away, then put in place', () => {
    small.set([1, 2, 3, -1, 0.5, 0]);
    rows.takeAway(small, 3, 5, 2);
    for (let k = 0; k < COLUMNS; k++) {
      expect(rows.row(5)[k]).toBeCloseTo(before[5][k] - before[0][k] - 2 * before[1][k] - 3 * before[2][k], 12);
      expect(rows.row(6)[k]).toBeCloseTo(before[6][k] + before[0][k] - 0.5 * before[1][k], 12);
    }
    small.set([0, 1, 0, 2, 0, -1]);
    rows.combine(small, 3, 2);
    for (let k = 0; k < COLUMNS; k++) {
      expect(rows.row(0)[k]).toBeCloseTo(before[1][k], 12);
      expect(rows.row(1)[k]).toBeCloseTo(2 * before[0][k] - before[2][k], 12);
    }
    expect(Array.from(rows.first(3).subarray(2 * COLUMNS))).toEqual(Array.from(before[2]));
  });
});

describe('a basis', () => {
  test('that has drifted is found out and set right, first rows changed least', () => {
    const [kernels] = bothKernels(TallRows.bytes(4, 4, COLUMNS) + 1e5);
    const rows = new TallRows(kernels, 4, 4, COLUMNS);
    const scratch = kernels.alloc64(16);
    for (let i = 0; i < 4; i++) fill(rows.row(i), i);
    orthonormaliseRows(rows, 4, scratch);
    expect(measureOrthogonality(rows, 4, scratch)).toBeLessThan(1e-14);
    const first = rows.row(0).slice();
    for (let k = 0; k < COLUMNS; k++) rows.row(2)[k] += 1e-6 * rows.row(1)[k];
    expect(measureOrthogonality(rows, 4, scratch)).toBeGreaterThan(ORTHOGONALITY_BOUND);
    orthonormaliseRows(rows, 4, scratch);
    expect(measureOrthogonality(rows, 4, scratch)).toBeLessThan(1e-14);
    rows.row(0).forEach((value, k) => {
      expect(Math.abs(value - first[k])).toBeLessThan(1e-14);
    });
  });

  test.each([1, 4, 32])('stays orthonormal over many rows, in blocks of %i', (blockRows) => {
    const random = openRandom(3);
    const svd = new IncrementalSvd({ columns: 40, rank: 6, blockRows, halfLifeRows: 200 });
    const row = new Float64Array(40);
    // Rows of very different sizes, nearly alike from one to the next: the worst of what windows of a slow scene are.
    for (let t = 0; t < 6000; t++) {
      for (let j = 0; j < 40; j++) row[j] = 0.999 * row[j] + 0.001 * random.normal() * 10 ** (-j / 5);
      svd.push(row);
    }
    const { basis, orthogonality, singularValues } = svd.factors();
    let worst = 0;
    for (let a = 0; a < 6; a++) {
      for (let b = 0; b <= a; b++) {
        let product = a === b ? -1 : 0;
        for (let j = 0; j < 40; j++) product += basis[a * 40 + j] * basis[b * 40 + j];
        worst = Math.max(worst, Math.abs(product));
      }
    }
    expect(worst).toBeLessThan(10 * ORTHOGONALITY_BOUND);
    expect(orthogonality).toBeLessThan(ORTHOGONALITY_BOUND);
    expect(singularValues.every((value) => value > 0)).toBe(true);
  });
});
