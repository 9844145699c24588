/** The window rival by its recursion of moments against the same regression on rows; and that it finds a known process. */
import { describe, expect, it } from 'vitest';
import { fitWindowRidge } from '../../../trainer/judge/window-ridge.ts';
import { gaussians } from '../../support/gaussian.ts';
import { recurrence } from '../../support/sample-bundle.ts';

describe('fitWindowRidge', () => {
  it('finds an autoregression of order two', () => {
    const next = recurrence(9);
    const normal = gaussians(() => next() / 2 ** 32);
    const y = new Float64Array(20_000);
    for (let t = 2; t < y.length; t++) y[t] = 1.2 * y[t - 1]! - 0.5 * y[t - 2]! + normal();
    const map = fitWindowRidge(y, 2, 0)!;
    let errors = 0;
    let count = 0;
    for (let t = 15_000; t < 19_990; t++) {
      let path = y[t]!;
      for (let k = 1; k <= map.lags; k++) path += (y[t - k]! - y[t]!) * map.weights[(k - 1) * 2]!;
      errors += (path - y[t + 1]!) ** 2;
      count++;
    }
    // Innovation variance 1: two per cent of chance over 5000 origins, half a per cent for 96 weights.
    expect(errors / count).toBeGreaterThan(0.93);
    expect(errors / count).toBeLessThan(1.05);
    expect(map.lags).toBe(96);
  });

  it('gives nothing where the part is too short', () => {
    expect(fitWindowRidge(new Float64Array(20), 10, 0)).toBeNull();
  });
});
