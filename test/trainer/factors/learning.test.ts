/** What is learned from factors is what is learned from the readings. */
import { describe, expect, it } from 'vitest';
import { momentsFromFactors } from '../../../trainer/factors/moments.ts';
import { featureCount } from '../../../trainer/identify/bank.ts';
import { ownFeatures, ridgeOwn } from '../../../trainer/identify/ridge.ts';
import {
  direct,
  gathered,
  horizon,
  plantValues,
  scalings,
  signalCount,
  wholeBank,
} from '../../support/factors-history.ts';

describe('a ridge map', () => {
  const values = plantValues(3000);
  const fromFactors = momentsFromFactors(gathered(values).end(), {
    bank: wholeBank,
    horizon,
    scalings,
    signalCount,
    round: null,
  });
  const fromReadings = direct(values, [[0, 2999]], wholeBank);
  const layout = { channelCount: 3, signalCount, featureCount: featureCount(wholeBank), steps: horizon };

  it.each([
    [1, 1e-9],
    [0.01, 1e-8],
    // A light penalty leaves directions in which features hardly differ, and what rounding says of them.
    [1e-4, 1e-6],
  ])('with penalty %d is the same', (penalty, tolerance) => {
    for (let signal = 0; signal < signalCount; signal++) {
      const chosen = ownFeatures(layout, signal);
      const got = ridgeOwn(fromFactors, layout, signal, chosen, penalty);
      const expected = ridgeOwn(fromReadings, layout, signal, chosen, penalty);
      const largest = expected.reduce((most, value) => Math.max(most, Math.abs(value)), 0);
      got.forEach((value, k) => {
        expect(Math.abs(value - expected[k]!) / largest).toBeLessThan(tolerance);
      });
    }
  });
});
