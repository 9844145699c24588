import { normalCdf, normalDensity, normalQuantile } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';

describe('published values', () => {
  // Abramowitz and Stegun (1964), Handbook of Mathematical Functions, table 26.1: P(x) and Z(x). From memory.
  test.each([
    [0, 0.5, 0.398942280401433],
    [0.1, 0.53982783727702899, 0.396952547477012],
    [0.5, 0.69146246127401312, 0.352065326764299],
    [1, 0.84134474606854293, 0.24197072451914337],
    [1.5, 0.9331927987311419, 0.12951759566589174],
    [2, 0.97724986805182079, 0.053990966513188063],
    [3, 0.9986501019683699, 0.0044318484119380075],
  ])('P(%d) and Z(%d)', (x, probability, density) => {
    expect(Math.abs(normalCdf(x) - probability)).toBeLessThan(6e-7);
    expect(Math.abs(normalCdf(-x) - (1 - probability))).toBeLessThan(6e-7);
    expect(Math.abs(normalDensity(x) - density)).toBeLessThan(1.3e-6);
    expect(normalDensity(-x)).toBe(normalDensity(x));
  });

  // R's qnorm; the first four also stand in every table of the t distribution under infinity. From memory.
  test.each([
    [0.9, 1.2815515655446004],
    [0.95, 1.6448536269514722],
    [0.975, 1.959963984540054],
    [0.99, 2.3263478740408408],
    [0.995, 2.5758293035489004],
    [0.5, 0],
  ])('quantile of %d', (probability, x) => {
    // Error of the table over the density there.
    expect(Math.abs(normalQuantile(probability) - x)).toBeLessThan(6e-7 / normalDensity(x) + 1e-12);
    expect(Math.abs(normalQuantile(1 - probability) + x)).toBeLessThan(6e-7 / normalDensity(x) + 1e-12);
  });
});

test('second route: integrating the density by Simpson’s rule, over the whole range', () => {
  const phi = (x: number): number => Math.exp((-x * x) / 2) / Math.sqrt(2 * Math.PI);
  const step = 1 / 256;
  let area = 0.5;
  let worst = 0;
  let worstDensity = 0;
  for (let k = 0; k < 9 * 256; k++) {
    const x = k * step;
    worst = Math.max(worst, Math.abs(normalCdf(x) - area));
    worstDensity = Math.max(worstDensity, Math.abs(normalDensity(x) - phi(x)));
    area += (step / 6) * (phi(x) + 4 * phi(x + step / 2) + phi(x + step));
  }
  expect(worst).toBeLessThan(6e-7);
  expect(worstDensity).toBeLessThan(1.3e-6);
  // The stated errors are not padded: a tenth of them would not hold.
  expect(worst).toBeGreaterThan(6e-8);
});

test('monotone from end to end', () => {
  for (let x = -8.5; x < 8.5; x += 0.003) expect(normalCdf(x + 0.003)).toBeGreaterThanOrEqual(normalCdf(x));
});
