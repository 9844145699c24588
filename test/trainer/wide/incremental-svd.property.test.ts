/** What must hold of any stream: a second route is the batch decomposition of ml-matrix on the same rows. */
import { Matrix, SVD } from 'ml-matrix';
import { describe, expect, it } from 'vitest';
import { IncrementalSvd, ridgeOf, type SvdFactors, type SvdShape } from '../../../trainer/wide/incremental-svd.ts';
import { openRandom } from '../../../trainer/wide/random.ts';

const BLOCKS = [1, 2, 7, 32, 64];

/** Rows of a given rank with falling sizes, and noise. */
function rowsOf(count: number, columns: number, rank: number, noise: number, seed = 1): Float64Array[] {
  const random = openRandom(seed);
  const directions = Array.from({ length: rank }, () => Float64Array.from({ length: columns }, () => random.normal()));
  return Array.from({ length: count }, () => {
    const row = Float64Array.from({ length: columns }, () => noise * random.normal());
    directions.forEach((direction, k) => {
      const share = random.normal() * 2 ** -k;
      for (let j = 0; j < columns; j++) row[j] += share * direction[j];
    });
    return row;
  });
}

function decompose(rows: readonly Float64Array[], shape: Omit<SvdShape, 'columns'>): SvdFactors {
  const svd = new IncrementalSvd({ columns: rows[0].length, ...shape });
  for (const row of rows) svd.push(row);
  return svd.factors();
}

function batchValues(rows: readonly Float64Array[]): number[] {
  return new SVD(new Matrix(rows.map((row) => Array.from(row))), { autoTranspose: true }).diagonal;
}

/** Largest entry of |B'B − X'X| beside the largest of X'X: signs and turns within equal values do not count. */
function covarianceError(rows: readonly Float64Array[], { singularValues, basis, columns }: SvdFactors): number {
  let worst = 0;
  let largest = 0;
  for (let a = 0; a < columns; a++) {
    for (let b = 0; b <= a; b++) {
      let exact = 0;
      for (const row of rows) exact += row[a] * row[b];
      let made = 0;
      singularValues.forEach((s, k) => {
        made += s * s * basis[k * columns + a] * basis[k * columns + b];
      });
      worst = Math.max(worst, Math.abs(made - exact));
      largest = Math.max(largest, Math.abs(exact));
    }
  }
  return worst / largest;
}

function departure({ basis, rank, columns }: SvdFactors): number {
  let worst = 0;
  for (let a = 0; a < rank; a++) {
    for (let b = 0; b < rank; b++) {
      let sum = 0;
      for (let j = 0; j < columns; j++) sum += basis[a * columns + j] * basis[b * columns + j];
      worst = Math.max(worst, Math.abs(sum - (a === b ? 1 : 0)));
    }
  }
  return worst;
}

describe.each(BLOCKS)('rows folded in by %i', (blockRows) => {
  it('agrees with the batch decomposition where the rank suffices', () => {
    const rows = rowsOf(150, 40, 6, 0);
    const factors = decompose(rows, { rank: 6, blockRows });
    const exact = batchValues(rows);
    for (const [k, s] of factors.singularValues.entries()) expect(Math.abs(s / exact[k] - 1)).toBeLessThan(1e-9);
    expect(covarianceError(rows, factors)).toBeLessThan(1e-10);
    expect(factors.discarded).toBeLessThan(1e-10 * factors.energy);
  });

  it('agrees where rows are more than columns and nothing is let go', () => {
    const rows = rowsOf(90, 9, 9, 1);
    const factors = decompose(rows, { rank: 9, blockRows });
    expect(covarianceError(rows, factors)).toBeLessThan(1e-12);
  });

  it('accounts for all energy, and stays orthonormal', () => {
    const rows = rowsOf(300, 60, 4, 0.3);
    const factors = decompose(rows, { rank: 5, blockRows });
    const kept = factors.singularValues.reduce((sum, s) => sum + s * s, 0);
    expect(Math.abs((kept + factors.discarded) / factors.energy - 1)).toBeLessThan(1e-12);
    expect(departure(factors)).toBeLessThan(1e-10);
    expect(ridgeOf(factors)).toBeCloseTo(factors.discarded / 60, 12);
    // Truncation costs little where a gap follows the rank, and never makes a value larger than it is.
    const exact = batchValues(rows);
    for (const [k, s] of factors.singularValues.entries()) expect(s).toBeLessThan(exact[k] * (1 + 1e-12));
    expect(factors.singularValues[0]).toBeGreaterThan(0.999 * exact[0]);
  });

  it('takes repeated rows, rows of zero and rows that lie in the span', () => {
    const [one, two] = rowsOf(2, 20, 2, 1);
    const zero = new Float64Array(20);
    const sum = one.map((value, j) => 1e6 * value - two[j]);
    const rows = [zero, one, one, zero, two, sum, one, two, sum];
    const factors = decompose(rows, { rank: 4, blockRows });
    expect(factors.singularValues.every(Number.isFinite)).toBe(true);
    expect(covarianceError(rows, factors)).toBeLessThan(1e-12);
    expect(departure(factors)).toBeLessThan(1e-9);
  });

  it('forgets by age, whatever the block', () => {
    const rows = rowsOf(80, 12, 12, 0.1);
    const factors = decompose(rows, { rank: 12, blockRows, halfLifeRows: 10 });
    const weighted = rows.map((row, i) => row.map((value) => value * Math.sqrt(2 ** (-(79 - i) / 10))));
    expect(covarianceError(weighted, factors)).toBeLessThan(1e-12);
    expect(factors.weight).toBeCloseTo((1 - 2 ** -8) / (1 - 2 ** -0.1), 9);
  });

  it('gives the same bits again', () => {
    const rows = rowsOf(100, 30, 5, 0.2);
    expect(decompose(rows, { rank: 4, blockRows })).toEqual(decompose(rows, { rank: 4, blockRows }));
  });
});

it('sees a decomposition that is off', () => {
  const rows = rowsOf(50, 10, 10, 0);
  const factors = decompose(rows, { rank: 10 });
  const wrong = { ...factors, singularValues: factors.singularValues.map((s, k) => (k === 0 ? 1.001 * s : s)) };
  expect(covarianceError(rows, wrong)).toBeGreaterThan(1e-4);
  expect(departure({ ...factors, basis: factors.basis.map((value) => 1.001 * value) })).toBeGreaterThan(1e-4);
});

it('refuses what cannot be', () => {
  expect(() => new IncrementalSvd({ columns: 0, rank: 1 })).toThrow('columns: expected 1 or more, got 0');
  expect(() => new IncrementalSvd({ columns: 4, rank: 1.5 })).toThrow('rank');
  expect(() => new IncrementalSvd({ columns: 4, rank: 1, halfLifeRows: 0 })).toThrow('halfLifeRows');
  const svd = new IncrementalSvd({ columns: 2, rank: 2 });
  expect(() => svd.push([1])).toThrow('expected 2 numbers, got 1');
  expect(() => svd.push([1, Number.NaN])).toThrow('row 0 of the decomposition holds a number that is not finite');
  svd.push([3, 4]);
  expect(svd.factors().singularValues[0]).toBeCloseTo(5, 12);
});

it('takes one row of a stream that spans less than the rank', () => {
  const factors = decompose([Float64Array.of(0, 2, 0)], { rank: 3 });
  expect(factors.rank).toBe(1);
  expect(Array.from(factors.basis, Math.abs)).toEqual([0, 1, 0]);
});
