/**
 * The filter against the Nile example: in its steady state the Kalman filter of the local level model is exponential
 * smoothing, which a bank with a single exponential mean expresses exactly (forecast = z + (e − z) at every step).
 */
import {
  createState,
  type FilterState,
  forecastPath,
  type LinearModel,
  predictNext,
  update,
} from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { NILE, NILE_LOCAL_LEVEL } from '../../reference/nile.ts';
import { linearCore, syntheticModel } from '../../support/models.ts';

const { observationVariance, levelVariance, filteredLevel, filteredVariance, predictedVariance } = NILE_LOCAL_LEVEL;
/** Steady-state gain: P = predicted variance solves P² = σ²η (P + σ²ε). */
const steadyPredicted = (levelVariance + Math.sqrt(levelVariance ** 2 + 4 * levelVariance * observationVariance)) / 2;
const gain = steadyPredicted / (steadyPredicted + observationVariance);

const H = 30;
const model: LinearModel = {
  ...syntheticModel({
    signals: ['flow'],
    horizon: H,
    order: 1,
    basis: 1,
    decays: [1 - gain],
    resonators: [],
    lags: [],
  }),
  featureScale: Float64Array.of(1),
  bottleneck: Float64Array.of(1),
  readout: Float64Array.of(1),
  horizonBasis: new Float64Array(H).fill(1),
  mean: Float64Array.of(900),
  scale: Float64Array.of(170),
  clipLow: Float64Array.of(0),
  clipHigh: Float64Array.of(3000),
  latticeStep: Float64Array.of(1),
  residualScale: Float64Array.of(1),
  rejectSd: 100,
};

interface KalmanStep {
  readonly predicted: number;
  readonly predictedVariance: number;
  readonly filtered: number;
  readonly filteredVariance: number;
}
/** The plain Kalman recursion, from a diffuse start: the level of the first year is its reading. NaN is missing. */
const kalman = (readings: readonly number[]): KalmanStep[] => {
  let level = readings[0];
  let variance: number = observationVariance;
  const steps = [{ predicted: level, predictedVariance: Infinity, filtered: level, filteredVariance: variance }];
  for (const y of readings.slice(1)) {
    const before = { predicted: level, predictedVariance: variance + levelVariance };
    const share = Number.isNaN(y) ? 0 : before.predictedVariance / (before.predictedVariance + observationVariance);
    if (share > 0) level += share * (y - level);
    variance = before.predictedVariance * (1 - share);
    steps.push({ ...before, filtered: level, filteredVariance: variance });
  }
  return steps;
};

const filter = (readings: readonly number[]): { state: FilterState; predicted: number[] } => {
  const state = createState(model);
  const out = new Float64Array(1);
  const predicted = readings.map((y, n) => {
    predictNext(model, state, out);
    update(model, state, n, Float64Array.of(y));
    return out[0];
  });
  return { state, predicted };
};

describe('Nile, local level', () => {
  test('the plain recursion gives the published values', () => {
    const last = kalman(NILE).at(-1)!;
    // Tolerances: half a unit of the last digit published.
    expect(Math.abs(last.filtered - filteredLevel)).toBeLessThan(5e-5);
    expect(Math.abs(last.filteredVariance - filteredVariance)).toBeLessThan(5e-4);
    expect(Math.abs(last.filteredVariance + levelVariance - predictedVariance)).toBeLessThan(5e-4);
    expect(Math.abs(steadyPredicted - predictedVariance)).toBeLessThan(5e-4);
    for (const { step, standardError } of NILE_LOCAL_LEVEL.forecastErrors) {
      const variance = last.filteredVariance + step * levelVariance + observationVariance;
      expect(Math.abs(Math.sqrt(variance) - standardError)).toBeLessThan(5e-3);
    }
  });

  test('the bank gives the published level, and forecasts it at every step', () => {
    const { state } = filter(NILE);
    const level = model.mean[0] + model.scale[0] * linearCore(state).memory[0];
    expect(Math.abs(level - filteredLevel)).toBeLessThan(5e-5);
    const median = new Float64Array(H);
    forecastPath(model, state, median);
    for (const y of median) expect(Math.abs(y - filteredLevel)).toBeLessThan(5e-5);
  });

  test('one-step forecasts are the Kalman filter’s once the start is forgotten', () => {
    const { predicted } = filter(NILE);
    const steps = kalman(NILE);
    // The gains differ at first; what is left of that falls by 1 − 0.267 a year.
    for (let n = 60; n < NILE.length; n++) expect(Math.abs(predicted[n] - steps[n].predicted)).toBeLessThan(1e-4);
    expect(Math.abs(predicted[2] - steps[2].predicted)).toBeGreaterThan(1);
  });

  test('through twenty years without readings the level is held, as the Kalman filter holds it', () => {
    // The years that Durbin and Koopman leave out in their section 2.7.
    const gapped = NILE.map((y, n) => (n >= 60 && n < 80 ? Number.NaN : y));
    const { predicted } = filter(gapped);
    const steps = kalman(gapped);
    for (let n = 60; n <= 80; n++) expect(Math.abs(predicted[n] - steps[n].predicted)).toBeLessThan(1e-4);
  });
});
