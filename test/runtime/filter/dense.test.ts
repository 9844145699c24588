/** The dense kernel against its stated order of summation, to the bit, for every remainder of rows and columns. */
import { describe, expect, test } from 'vitest';
import { multiply } from '../../../runtime/filter/dense.ts';
import { seededNumbers } from '../../support/models.ts';

/** Four partial sums over the indices 0, 1, 2, 3 modulo 4, then (s0 + s1) + (s2 + s3). */
function inOrder(matrix: Float64Array, row: number, cols: number, vector: Float64Array, at: number): number {
  const sums = [0, 0, 0, 0];
  for (let j = 0; j < cols; j++) sums[j % 4]! += matrix[row * cols + j]! * vector[at + j]!;
  return sums[0]! + sums[1]! + (sums[2]! + sums[3]!);
}

describe('multiply', () => {
  const random = seededNumbers(11);
  const numbers = (count: number): Float64Array => Float64Array.from({ length: count }, () => 10 ** (8 * random() - 4));

  test.each([1, 2, 3, 4, 7])('%d rows, one to nine columns', (rows) => {
    for (let cols = 1; cols <= 9; cols++) {
      const [matrix, vector, out] = [numbers(rows * cols), numbers(cols + 2), new Float64Array(rows + 3)];
      multiply(matrix, rows, cols, vector, 2, out, 1);
      const wanted = Array.from({ length: rows }, (_, row) => inOrder(matrix, row, cols, vector, 2));
      expect([...out]).toEqual([0, ...wanted, 0, 0]);
    }
  });
});
