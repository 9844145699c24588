/**
 * Certified values of the NIST Statistical Reference Datasets, Nonlinear Regression (National Institute of Standards and
 * Technology, www.itl.nist.gov/div898/strd): Misra1a and DanWood, both their published starts. Data and certified values
 * from memory; a slip would show, since they certify each other.
 */
import { describe, expect, test } from 'vitest';
import { type LeastSquares, minimise } from '../../../trainer/featured/levenberg-marquardt.ts';

type Curve = (b: Float64Array, x: number) => { readonly value: number; readonly slopes: readonly number[] };

function problemOf(curve: Curve, xs: readonly number[], ys: readonly number[]): LeastSquares {
  const linearise = (b: Float64Array) => {
    const P = b.length;
    const normal = new Float64Array(P * P);
    const gradient = new Float64Array(P);
    let cost = 0;
    xs.forEach((x, k) => {
      const { value, slopes } = curve(b, x);
      const error = value - ys[k];
      cost += 0.5 * error * error;
      for (let i = 0; i < P; i++) {
        gradient[i] += slopes[i] * error;
        for (let j = 0; j <= i; j++) normal[i * P + j] += slopes[i] * slopes[j];
      }
    });
    return { cost, normal, gradient };
  };
  return { cost: (b) => linearise(b).cost, linearise };
}

const misra: Curve = (b, x) => {
  const fallen = Math.exp(-b[1] * x);
  return { value: b[0] * (1 - fallen), slopes: [1 - fallen, b[0] * x * fallen] };
};
const misraX = [77.6, 114.9, 141.1, 190.8, 239.9, 289, 332.8, 378.4, 434.8, 477.3, 536.8, 593.1, 689.1, 760];
const misraY = [10.07, 14.73, 17.94, 23.93, 29.61, 35.18, 40.02, 44.82, 50.76, 55.05, 61.01, 66.4, 75.47, 81.78];

const danwood: Curve = (b, x) => ({ value: b[0] * x ** b[1], slopes: [x ** b[1], b[0] * x ** b[1] * Math.log(x)] });
const danwoodX = [1.309, 1.471, 1.49, 1.565, 1.611, 1.68];
const danwoodY = [2.138, 3.421, 3.597, 4.34, 4.882, 5.66];

describe('certified minima', () => {
  test.each([
    ['Misra1a, start 1', problemOf(misra, misraX, misraY), [500, 1e-4], [238.94212918, 5.5015643181e-4], 0.12455138894],
    ['Misra1a, start 2', problemOf(misra, misraX, misraY), [250, 5e-4], [238.94212918, 5.5015643181e-4], 0.12455138894],
    [
      'DanWood, start 1',
      problemOf(danwood, danwoodX, danwoodY),
      [1, 5],
      [0.76886226176, 3.8604055871],
      4.3173084083e-3,
    ],
    [
      'DanWood, start 2',
      problemOf(danwood, danwoodX, danwoodY),
      [0.7, 4],
      [0.76886226176, 3.8604055871],
      4.3173084083e-3,
    ],
  ] as const)('%s', (_, problem, start, certified, squares) => {
    const { parameters, cost } = minimise(problem, Float64Array.from(start), 200, 1e-16);
    // Six digits are what the datasets' authors ask of good software.
    for (const [k, value] of certified.entries()) expect(Math.abs(parameters[k] / value - 1)).toBeLessThan(1e-6);
    expect(Math.abs((2 * cost) / squares - 1)).toBeLessThan(1e-6);
  });
});

test('never ends higher than it began, and leaves a start of infinite cost alone', () => {
  const wall: LeastSquares = {
    cost: () => Number.POSITIVE_INFINITY,
    linearise: () => ({ cost: Number.POSITIVE_INFINITY, normal: new Float64Array(1), gradient: new Float64Array(1) }),
  };
  expect(minimise(wall, Float64Array.of(3), 10)).toMatchObject({ cost: Number.POSITIVE_INFINITY, iterations: 0 });
  const problem = problemOf(misra, misraX, misraY);
  for (const start of [
    [1, 1],
    [-500, 1e-3],
    [1e4, 1e-6],
  ]) {
    const from = Float64Array.from(start);
    expect(minimise(problem, from, 50).cost).toBeLessThanOrEqual(problem.cost(from));
  }
});
