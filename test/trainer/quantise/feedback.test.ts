/** Rounding with feedback: what it leaves is less than plain rounding leaves, where features are alike. */
import { describe, expect, it } from 'vitest';
import { dequantise, quantiseTensor } from '../../../protocol/index.ts';
import { cholesky, solveCholesky } from '../../../trainer/linalg/cholesky.ts';
import { replacements, roundRows } from '../../../trainer/quantise/feedback.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const n = 12;
const rows = 40;
const next = recurrence(31);
const uniform = (): number => next() / 2 ** 31 - 1;

/** Neighbours share `alike` of what they are. */
function covarianceOf(alike: number): Float64Array {
  return Float64Array.from({ length: n * n }, (_, at) => alike ** Math.abs(Math.floor(at / n) - (at % n)));
}

/** Mean squared change of the rows' outputs, as a share of the outputs. */
function damage(exact: Float64Array, got: Float64Array, covariance: Float64Array): number {
  const energy = (m: Float64Array): number => {
    let sum = 0;
    for (let r = 0; r < rows; r++) {
      for (let a = 0; a < n; a++) {
        for (let b = 0; b < n; b++) sum += m[r * n + a]! * covariance[a * n + b]! * m[r * n + b]!;
      }
    }
    return sum;
  };
  return energy(exact.map((value, k) => value - got[k]!)) / energy(exact);
}

describe('replacements', () => {
  it('regresses each feature on those after it', () => {
    const covariance = covarianceOf(0.9);
    const got = replacements(covariance, n);
    const j = 4;
    const m = n - 1 - j;
    const gram = new Float64Array(m * m);
    const right = new Float64Array(m);
    for (let a = 0; a < m; a++) {
      right[a] = covariance[(j + 1 + a) * n + j]!;
      for (let b = 0; b < m; b++) gram[a * m + b] = covariance[(j + 1 + a) * n + j + 1 + b]!;
      gram[a * m + a]! *= 1 + 1e-4;
    }
    solveCholesky(cholesky(gram, m), m, right, 1);
    expect(got[j * n + j]).toBe(1);
    right.forEach((weight, a) => {
      expect(got[j * n + j + 1 + a]!).toBeCloseTo(-weight, 10);
    });
  });

  it('bears a feature that never moves', () => {
    const covariance = covarianceOf(0.5);
    for (let a = 0; a < n; a++) {
      covariance[3 * n + a] = 0;
      covariance[a * n + 3] = 0;
    }
    expect(replacements(covariance, n).every(Number.isFinite)).toBe(true);
    expect(replacements(new Float64Array(n * n), n).every(Number.isFinite)).toBe(true);
  });
});

describe('roundRows', () => {
  const exact = Float64Array.from({ length: rows * n }, uniform);

  it.each([
    [0.9, 0.5],
    [0.99, 0.2],
  ])('at a likeness of %d leaves less than %d of what plain rounding does', (alike, share) => {
    const covariance = covarianceOf(alike);
    const replaced = replacements(covariance, n);
    const fed = dequantise(roundRows(exact, rows, n, () => replaced));
    const plain = dequantise(quantiseTensor(exact, rows, n, 'i8'));
    expect(damage(exact, fed, covariance)).toBeLessThan(share * damage(exact, plain, covariance));
  });

  it('is plain rounding where features have nothing in common', () => {
    const replaced = replacements(covarianceOf(0), n);
    const fed = dequantise(roundRows(exact, rows, n, () => replaced));
    expect(Array.from(fed)).toEqual(Array.from(dequantise(quantiseTensor(exact, rows, n, 'i8'))));
  });

  it('writes zeros for a row of zeros', () => {
    const { data } = roundRows(new Float64Array(n), 1, n, () => replacements(covarianceOf(0.9), n));
    expect(data.every((byte) => byte === 0)).toBe(true);
  });
});
