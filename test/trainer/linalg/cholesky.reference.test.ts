/**
 * Regression by our Cholesky solves against published values.
 *
 * Longley, J. American Statistical Association 62 (1967): the data and the certified coefficients are NIST StRD, "Linear
 * Least Squares Regression", dataset Longley (certified to 15 digits). Predictors are centred and scaled first, since normal
 * equations square the condition number. Regenerate with numpy: solve(Z'Z, Z'y) on the same Z.
 *
 * Ridge: Hoerl, Kennard and Baldwin's and Lawless and Wang's penalties for the same data in the frame of R's `longley`,
 * printed by the example of MASS::lm.ridge (Venables & Ripley, Modern Applied Statistics with S, 4th ed. 2002) as
 * 0.006836982 and 0.05267247; they need the least-squares fit to all its digits. Coefficients at penalty 0.006 and 0.1 were
 * regenerated with numpy 2.4.6 (singular values, as lm.ridge does), to 9 digits.
 */
import { describe, expect, it } from 'vitest';
import { cholesky, solveCholesky, solveLower, solveLowerTransposed } from '../../../trainer/linalg/cholesky.ts';
import { multiply, multiplyTransposed, transpose } from '../../../trainer/linalg/products.ts';

const employed = [
  60323, 61122, 60171, 61187, 63221, 63639, 64989, 63761, 66019, 67857, 68169, 66513, 68655, 69564, 69331, 70551,
];
const deflator = [83, 88.5, 88.2, 89.5, 96.2, 98.1, 99, 100, 101.2, 104.6, 108.4, 110.8, 112.6, 114.2, 115.7, 116.9];
const product = [
  234289, 259426, 258054, 284599, 328975, 346999, 365385, 363112, 397469, 419180, 442769, 444546, 482704, 502601,
  518173, 554894,
];
const unemployed = [2356, 2325, 3682, 3351, 2099, 1932, 1870, 3578, 2904, 2822, 2936, 4681, 3813, 3931, 4806, 4007];
const forces = [1590, 1456, 1616, 1650, 3099, 3594, 3547, 3350, 3048, 2857, 2798, 2637, 2552, 2514, 2572, 2827];
const population = [
  107608, 108632, 109773, 110929, 112075, 113270, 115094, 116219, 117388, 118734, 120445, 121950, 123366, 125368,
  127852, 130081,
];
const year = Array.from({ length: 16 }, (_, k) => 1947 + k);

const mean = (values: readonly number[]): number => values.reduce((sum, value) => sum + value, 0) / values.length;
const scaled = (values: readonly number[], by: number): number[] => values.map((value) => value * by);

/** Ridge on centred predictors of unit mean square, penalty as lm.ridge has it; coefficients in the predictors' own units. */
function ridge(columns: readonly (readonly number[])[], y: readonly number[], penalty: number): number[] {
  const n = y.length;
  const p = columns.length;
  const centre = columns.map(mean);
  const size = columns.map((column, j) => Math.sqrt(mean(column.map((value) => (value - centre[j]!) ** 2))));
  const z = new Float64Array(n * p);
  for (let i = 0; i < n; i++) for (let j = 0; j < p; j++) z[i * p + j] = (columns[j]![i]! - centre[j]!) / size[j]!;
  const right = Float64Array.from(y, (value) => value - mean(y));
  const gram = multiplyTransposed(z, z, p, n, p);
  for (let j = 0; j < p; j++) gram[j * p + j]! += penalty;
  const solution = multiplyTransposed(z, right, p, n, 1);
  solveCholesky(cholesky(gram, p), p, solution, 1);
  return Array.from(solution, (value, j) => value / size[j]!);
}

const digits = (got: number, expected: number): number => -Math.log10(Math.abs(got - expected) / Math.abs(expected));

describe('Longley by Cholesky', () => {
  it('gives the certified coefficients to at least nine digits', () => {
    const columns = [deflator, product, unemployed, forces, population, year];
    const got = ridge(columns, employed, 0);
    const certified = [
      15.0618722713733, -0.035819179292591, -2.02022980381683, -1.03322686717359, -0.0511041056535807, 1829.15146461355,
    ];
    // The correlation matrix has condition number 1.1e4 squared away from 1e16: nine digits are what is left.
    certified.forEach((value, j) => {
      expect(digits(got[j]!, value)).toBeGreaterThan(9);
    });
    const intercept = mean(employed) - columns.reduce((sum, column, j) => sum + mean(column) * got[j]!, 0);
    expect(digits(intercept, -3482258.63459582)).toBeGreaterThan(9);
  });

  it("gives R's ridge penalties and coefficients", () => {
    const columns = [
      scaled(product, 1e-3),
      scaled(unemployed, 0.1),
      scaled(forces, 0.1),
      scaled(population, 1e-3),
      year,
      scaled(employed, 1e-3),
    ];
    const n = 16;
    const p = 6;
    const free = ridge(columns, deflator, 0);
    const fitted = deflator.map((_, i) => columns.reduce((sum, c, j) => sum + (c[i]! - mean(c)) * free[j]!, 0));
    const rest = deflator.map((value, i) => value - mean(deflator) - fitted[i]!);
    const variance = rest.reduce((sum, value) => sum + value * value, 0) / (n - p - 1);
    const unit = free.map((b, j) => b * Math.sqrt(mean(columns[j]!.map((v) => (v - mean(columns[j]!)) ** 2))));
    const hkb = ((p - 2) * variance) / unit.reduce((sum, b) => sum + b * b, 0);
    const lw = ((p - 2) * variance * n) / fitted.reduce((sum, value) => sum + value * value, 0);
    expect(hkb).toBeCloseTo(0.006836982, 9);
    expect(lw).toBeCloseTo(0.05267247, 8);
    const at = (penalty: number, expected: readonly number[]): void => {
      ridge(columns, deflator, penalty).forEach((b, j) => {
        expect(digits(b, expected[j]!)).toBeGreaterThan(6);
      });
    };
    at(0.006, [0.17651367, 0.01937157, 0.00656539, -1.32845959, 0.25560068, -0.05811937]);
    at(0.1, [0.054577, 0.0119844, 0.01261978, -0.18560414, 0.72180542, 0.58848838]);
  });
});

describe('cholesky', () => {
  it('factors a matrix that its product gives back, and solves by halves', () => {
    const n = 7;
    const m = 3;
    const a = Float64Array.from({ length: n * n }, (_, k) => {
      const i = Math.floor(k / n);
      const j = k % n;
      return Math.min(i, j) + 1 + (i === j ? 0.5 : 0);
    });
    const l = cholesky(a, n);
    const back = multiply(l, transpose(l, n, n), n, n, n);
    // Entries up to 8, a dozen roundings.
    for (let k = 0; k < a.length; k++) expect(Math.abs(back[k]! - a[k]!)).toBeLessThan(1e-14);
    const x = Float64Array.from({ length: n * m }, (_, k) => Math.sin(k + 1));
    const b = multiply(a, x, n, n, m);
    solveCholesky(l, n, b, m);
    for (let k = 0; k < x.length; k++) expect(Math.abs(b[k]! - x[k]!)).toBeLessThan(1e-13);
    const half = multiply(l, x, n, n, m);
    solveLower(l, n, half, m);
    for (let k = 0; k < x.length; k++) expect(Math.abs(half[k]! - x[k]!)).toBeLessThan(1e-14);
    const other = multiplyTransposed(l, x, n, n, m);
    solveLowerTransposed(l, n, other, m);
    for (let k = 0; k < x.length; k++) expect(Math.abs(other[k]! - x[k]!)).toBeLessThan(1e-14);
  });

  it('refuses what is not positive definite or not finite', () => {
    expect(() => cholesky(Float64Array.of(1, 2, 2, 1), 2)).toThrow(/not positive definite: pivot -3 at row 1/);
    expect(() => cholesky(Float64Array.of(1, 0, 0, 0), 2)).toThrow(/pivot 0 at row 1/);
    expect(() => cholesky(Float64Array.of(Number.NaN, 0, 0, 1), 2)).toThrow(/pivot NaN at row 0/);
  });
});
