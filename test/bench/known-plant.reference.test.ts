/**
 * The exact filters of the known plants against statsmodels 0.13.5 (Debian 12), `statespace.mlemodel.MLEModel`, initialised as
 * stationary, run on 2026-12-01 over the plants' own values of seed 5, 4000 ticks: mean of the squared errors of steps 1..24 of the
 * signals from origins 3199..3975. To regenerate: write the values to a file, set design, transition, selection (identity),
 * state_cov and obs_cov as the plant's file has them, and run `predicted_state` forward by powers of the transition.
 */
import { describe, expect, it } from 'vitest';
import { coupledPlant } from './known-coupled.ts';
import { knownPlant } from './known-plant.ts';

const PLANTS = [
  { name: 'three plants apart', make: knownPlant, mse: 2.5490664377051506 },
  { name: 'a coupled plant with an input', make: coupledPlant, mse: 2.7891714316007397 },
];
/** The plants' noise goes through Math.log and Math.cos, whose last bits are the engine's own. */
const TOLERANCE = 1e-9;

describe.each(PLANTS)('the optimum of $name', ({ make, mse }) => {
  it('is the one that another Kalman filter gives', () => {
    expect(Math.abs(make(4000, 5).optimum(3200) / mse - 1)).toBeLessThan(TOLERANCE);
  });

  it('is that of these readings and no others', () => {
    expect(Math.abs(make(4000, 6).optimum(3200) / mse - 1)).toBeGreaterThan(TOLERANCE);
  });
});
