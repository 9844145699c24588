/**
 * Symmetric eigenvalues against published matrices.
 *
 * Rosser and others, J. Research of the National Bureau of Standards 47 (1951): an 8 × 8 integer matrix with a double, a
 * nearly equal, a zero and an opposite eigenvalue; exact values 10√10405, 510 ± 100√26, 1000 (twice), 1020, 0.
 * Hilbert matrices: condition numbers 524.0568 (n = 3), 15513.74 (4), 476607.3 (5), 1.495106e7 (6), as tabled since Todd,
 * Applied Mathematics Series 39 (1954), and in Golub & Van Loan, Matrix Computations.
 * Wilkinson, The Algebraic Eigenvalue Problem (1965), W21+: the largest pair agrees to 14 digits, 10.746194182903393 and
 * 10.746194182903322.
 */
import { describe, expect, it } from 'vitest';
import { symmetricEigen } from '../../../trainer/linalg/eigen.ts';
import { multiply, transpose } from '../../../trainer/linalg/products.ts';

const rosser = Float64Array.from([
  611, 196, -192, 407, -8, -52, -49, 29, 196, 899, 113, -192, -71, -43, -8, -44, -192, 113, 899, 196, 61, 49, 8, 52,
  407, -192, 196, 611, 8, 44, 59, -23, -8, -71, 61, 8, 411, -599, 208, 208, -52, -43, 49, 44, -599, 411, 208, 208, -49,
  -8, 8, 59, 208, 208, 99, -911, 29, -44, 52, -23, 208, 208, -911, 99,
]);

const hilbert = (n: number): Float64Array =>
  Float64Array.from({ length: n * n }, (_, k) => 1 / (Math.floor(k / n) + (k % n) + 1));

describe('symmetricEigen', () => {
  it("finds Rosser's eigenvalues, near ones kept apart", () => {
    const expected = [
      10 * Math.sqrt(10405),
      1020,
      510 + 100 * Math.sqrt(26),
      1000,
      1000,
      510 - 100 * Math.sqrt(26),
      0,
      -10 * Math.sqrt(10405),
    ];
    const { values } = symmetricEigen(rosser, 8);
    // A few roundings of the norm, 1020.
    values.forEach((value, k) => {
      expect(Math.abs(value - expected[k]!)).toBeLessThan(2e-12);
    });
  });

  it('gives the condition numbers of Hilbert matrices', () => {
    const conditions: readonly (readonly [number, number])[] = [
      [3, 524.0567775860644],
      [4, 15513.73873892924],
      [5, 476607.250242259],
      [6, 14951058.64],
    ];
    for (const [n, expected] of conditions) {
      const { values } = symmetricEigen(hilbert(n), n);
      // The smallest eigenvalue is known to an absolute 1e-16: relative to it, condition × 1e-16, with room.
      expect(Math.abs(values[0]! / values[n - 1]! / expected - 1)).toBeLessThan(1e-8);
    }
  });

  it("tells the two largest eigenvalues of Wilkinson's W21+ apart by nothing", () => {
    const n = 21;
    const w = new Float64Array(n * n);
    for (let i = 0; i < n; i++) {
      w[i * n + i] = Math.abs(10 - i);
      if (i > 0) w[i * n + i - 1] = 1;
      if (i < n - 1) w[i * n + i + 1] = 1;
    }
    const { values } = symmetricEigen(w, n);
    expect(values[0]!).toBeCloseTo(10.746194182903393, 12);
    expect(values[1]!).toBeCloseTo(10.746194182903322, 12);
  });

  it('has orthonormal vectors that give the matrix back, largest entry positive', () => {
    const n = 8;
    const { values, vectors } = symmetricEigen(rosser, n);
    const scaled = vectors.map((value, at) => value * values[at % n]!);
    const back = multiply(scaled, transpose(vectors, n, n), n, n, n);
    for (let k = 0; k < back.length; k++) expect(Math.abs(back[k]! - rosser[k]!)).toBeLessThan(5e-12);
    for (let k = 0; k < n; k++) {
      const column = Array.from({ length: n }, (_, i) => vectors[i * n + k]!);
      expect(column.reduce((best, value) => (Math.abs(value) > Math.abs(best) ? value : best), 0)).toBeGreaterThan(0);
    }
  });

  it('refuses what would make the library beneath loop for ever', () => {
    expect(() => symmetricEigen(Float64Array.of(1, Number.NaN, Number.NaN, 1), 2)).toThrow(/Entry 1 .* is NaN/);
    expect(() => symmetricEigen(Float64Array.of(1, 0, 0, Number.POSITIVE_INFINITY), 2)).toThrow(
      /Entry 3 .* is Infinity/,
    );
  });
});
