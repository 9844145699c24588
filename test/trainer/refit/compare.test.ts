/** The ratios of a new model over the previous one, signal by signal, as one verdict. */
import { expect, test } from 'vitest';
import { overall } from '../../../trainer/refit/compare.ts';

test('the mean is geometric, and one signal much worse is never averaged away', () => {
  expect(overall([0.5, 0.5 / 4]).ratio).toBeCloseTo(0.25, 12);
  expect(overall([0.5, 1.09]).isNoneMuchWorse).toBe(true);
  expect(overall([0.1, 1.11]).isNoneMuchWorse).toBe(false);
});

test('a signal the previous model forecast without any error counts as much worse, not as unknown', () => {
  expect(overall([0.5, Number.POSITIVE_INFINITY])).toEqual({ ratio: 0.5, isNoneMuchWorse: false });
  expect(overall([0.5, Number.NaN])).toEqual({ ratio: 0.5, isNoneMuchWorse: true });
});
