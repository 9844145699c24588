/** The free run's normal equations against finite differences, and what a linear start recovers. */
import { expect, test } from 'vitest';
import { featuresOf } from '../../../trainer/featured/ensemble.ts';
import { freeRun, freeRunProblem, parameterLayout } from '../../../trainer/featured/free-run.ts';
import { fitLinearStart, NO_FEATURES } from '../../../trainer/featured/linear-start.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seededNumbers } from '../../support/models.ts';

const shape = { signalCount: 2, inputCount: 1, hiddenCount: 1, featureCount: 5 };
const random = seededNumbers(4);
const series = (ticks: number): Float64Array => Float64Array.from({ length: ticks }, () => 2 * random() - 1);
const record = { signals: [series(40), series(40)], inputs: [series(40)], from: 3, to: 40 };
record.signals[0][17] = Number.NaN;

test('the gradient is that of the cost, by central differences', () => {
  const { count } = parameterLayout(shape);
  const parameters = Float64Array.from({ length: count }, () => 0.3 * (2 * random() - 1));
  const problem = freeRunProblem(shape, featuresOf(shape, 1.5, 3), record, 0.7);
  const { gradient, cost } = problem.linearise(parameters);
  expect(cost).toBeCloseTo(problem.cost(parameters), 12);
  for (let p = 0; p < count; p++) {
    const step = 1e-5;
    const moved = (by: number): number => problem.cost(parameters.map((value, k) => (k === p ? value + by : value)));
    // Rounding of costs near ten over the step, and the third derivative times its square.
    expect(Math.abs((moved(step) - moved(-step)) / (2 * step) - gradient[p])).toBeLessThan(1e-6);
  }
});

test('the normal matrix is J J of the same Jacobian: exact where the model is linear in what moves', () => {
  const plain = { ...shape, featureCount: 0 };
  const { count, startAt } = parameterLayout(plain);
  const parameters = Float64Array.from({ length: count }, () => 0.3 * (2 * random() - 1));
  const problem = freeRunProblem(plain, NO_FEATURES, record, 0);
  const at = problem.linearise(parameters);
  // The run is linear in where it starts, so the cost is a parabola there.
  for (let k = startAt; k < count; k++) {
    const moved = parameters.map((value, p) => (p === k ? value + 0.5 : value));
    expect(problem.cost(moved)).toBeCloseTo(at.cost + 0.5 * at.gradient[k] + 0.125 * at.normal[k * count + k], 10);
  }
});

test('a linear plant with a hidden state is found again from 600 noisy ticks', () => {
  const normal = gaussians(seededNumbers(9));
  const ticks = 900;
  const u = new Float64Array(ticks);
  const clean = new Float64Array(ticks);
  let [a, b] = [0, 0];
  for (let t = 0; t < ticks; t++) {
    u[t] = t % 13 === 0 ? normal() : (u[t - 1] ?? 0);
    clean[t] = b;
    [a, b] = [0.9 * a + 0.1 * u[t], 0.85 * b + 0.3 * a];
  }
  const sd = Math.sqrt(clean.reduce((sum, value) => sum + value * value, 0) / ticks);
  const y = clean.map((value) => value / sd + 0.1 * normal());
  const found = fitLinearStart({ signals: [y], inputs: [u], from: 0, to: 600 }, 1);
  if (found === null) throw new Error('no start found');
  const [run] = freeRun(found.shape, NO_FEATURES, found.parameters, { signals: [y], inputs: [u], from: 0, to: ticks });
  let square = 0;
  for (let t = 600; t < ticks; t++) square += (run[t] - clean[t] / sd) ** 2 / (ticks - 600);
  // Eight parameters from 600 readings of noise 0.1: √(8/600) · 0.1 = 0.012 to be expected.
  expect(Math.sqrt(square)).toBeLessThan(0.025);
});
