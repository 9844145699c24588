/**
 * The exact filter of the known plant against statsmodels 0.13.5 (Debian 12), `statespace.mlemodel.MLEModel` with one state a
 * signal, initialised as stationary, run on 2026-12-01 over the plant's own values of seed 5, 4000 ticks: mean of the squared
 * errors of steps 1..24 from origins 3199..3975, over three signals. To regenerate: write the values to a file, set design 1,
 * transition a, selection 1, state_cov q², obs_cov r², and run `predicted_state` forward by powers of a.
 */
import { describe, expect, it } from 'vitest';
import { knownPlant } from './known-plant.ts';

const STATSMODELS_MSE = 2.5490664377051506;
/** The plant's noise goes through Math.log and Math.cos, whose last bits are the engine's own. */
const TOLERANCE = 1e-9;

describe('the known plant', () => {
  it('has the optimum that another Kalman filter gives', () => {
    const optimum = knownPlant(4000, 5).optimum(3200);
    expect(Math.abs(optimum / STATSMODELS_MSE - 1)).toBeLessThan(TOLERANCE);
  });

  it('would show a filter that is slightly off', () => {
    expect(Math.abs(knownPlant(4000, 6).optimum(3200) / STATSMODELS_MSE - 1)).toBeGreaterThan(TOLERANCE);
  });
});
