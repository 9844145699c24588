/** Leading eigenvectors against the full decomposition, on spectra like those of forecasts. */
import { describe, expect, it } from 'vitest';
import { symmetricEigen } from '../../../trainer/linalg/eigen.ts';
import { leadingEigen } from '../../../trainer/linalg/leading-eigen.ts';
import { multiply, multiplyTransposed } from '../../../trainer/linalg/products.ts';
import { recurrence } from '../../support/sample-bundle.ts';

/** B'B with rows of B shrinking by `fall`. */
function falling(n: number, rows: number, fall: number): Float64Array {
  const next = recurrence(9);
  const b = Float64Array.from({ length: rows * n }, (_, at) => {
    return (next() / 2 ** 31 - 1) * fall ** Math.floor(at / n);
  });
  return multiplyTransposed(b, b, n, rows, n);
}

describe('leadingEigen', () => {
  const n = 120;
  const count = 12;
  const a = falling(n, n, 0.8);
  const got = leadingEigen(a, n, count);

  it('finds the values of the full decomposition, falling', () => {
    const { values } = symmetricEigen(a, n);
    // Eight rounds shrink the error of value k by the (value 29 / value k)^16: below 1e-9 for all twelve at this fall.
    for (let k = 0; k < count; k++) expect(got.values[k]! / values[k]!).toBeCloseTo(1, 9);
  });

  it('has orthonormal vectors that the matrix leaves uncorrelated', () => {
    const inner = multiplyTransposed(got.vectors, got.vectors, count, n, count);
    const pushed = multiply(a, got.vectors, n, n, count);
    const spread = multiplyTransposed(got.vectors, pushed, count, n, count);
    for (let i = 0; i < count; i++) {
      for (let j = 0; j < count; j++) {
        expect(inner[i * count + j]!).toBeCloseTo(i === j ? 1 : 0, 10);
        if (i !== j) expect(Math.abs(spread[i * count + j]!) / got.values[0]!).toBeLessThan(1e-10);
      }
    }
  });

  it('bears a matrix of lower rank than asked for', () => {
    const { values, vectors } = leadingEigen(falling(n, 5, 0.8), n, count);
    expect(vectors.every(Number.isFinite)).toBe(true);
    for (let k = 5; k < count; k++) expect(Math.abs(values[k]!) / values[0]!).toBeLessThan(1e-12);
  });

  it('takes the full road where the matrix is small', () => {
    const small = falling(20, 20, 0.9);
    expect(Array.from(leadingEigen(small, 20, 7).values)).toEqual(
      Array.from(symmetricEigen(small, 20).values.slice(0, 7)),
    );
  });

  it('refuses what is not finite', () => {
    const bad = a.slice();
    bad[3] = Number.NaN;
    expect(() => leadingEigen(bad, n, count)).toThrow(/Entry 3 of a symmetric matrix is NaN/);
  });
});
