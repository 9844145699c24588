/** Quantiles of R 4.2.2: `qchisq(p, n, lower.tail = FALSE)`, printed to twelve digits. */
import { expect, test } from 'vitest';
import { chiSquareLimit, chiSquareTail } from '../../../runtime/signals/chi-square.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seededNumbers } from '../../support/models.ts';

test.each([
  [2, 0.05, 5.99146454711],
  [2, 0.001, 13.815510558],
  [2, 6e-5, 19.4423319915],
  [10, 0.05, 18.3070380533],
  [10, 0.001, 29.5882984451],
  [10, 6e-5, 36.8531858626],
  [60, 0.05, 79.0819444878],
  [60, 0.001, 99.6072330698],
  [60, 6e-5, 111.576149366],
  [120, 0.05, 146.567357581],
  [120, 0.001, 173.617436456],
  [120, 6e-5, 188.965580132],
])('%d squares, probability %d', (freedom, probability, quantile) => {
  expect(chiSquareLimit(freedom, probability) / quantile - 1).toBeCloseTo(0, 9);
  expect(chiSquareTail(freedom, quantile) / probability - 1).toBeCloseTo(0, 7);
});

test('blocks of sixty normal numbers exceed their bound once in as many readings as was asked for', () => {
  const normal = gaussians(seededNumbers(99));
  const runLength = 3000;
  const limit = chiSquareLimit(60, 60 / runLength);
  const blocks = 20_000;
  let beyond = 0;
  for (let block = 0; block < blocks; block++) {
    let sum = 0;
    for (let k = 0; k < 60; k++) sum += normal() ** 2;
    if (sum > limit) beyond++;
  }
  // A binomial count of 400: five standard deviations.
  expect(Math.abs(beyond - (blocks * 60) / runLength)).toBeLessThan(5 * Math.sqrt((blocks * 60) / runLength));
});
