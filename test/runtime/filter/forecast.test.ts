import {
  createState,
  type FilterState,
  forecastPath,
  type LinearModel,
  predictNext,
  restoreState,
  saveState,
  update,
} from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { linearCore, syntheticModel, syntheticReadings } from '../../support/models.ts';
import { slowFeatures, slowPath } from '../../support/slow-filter.ts';

const run = (model: LinearModel, readings: readonly Float64Array[]): FilterState => {
  const state = createState(model);
  for (const [n, values] of readings.entries()) update(model, state, n, values);
  return state;
};
const pathOf = (model: LinearModel, state: FilterState): Float64Array => {
  const median = new Float64Array(model.signalCount * model.horizon);
  forecastPath(model, state, median);
  return median;
};

describe.each([
  ['plain', {}],
  ['with an own part and the level', { own: true, level: true }],
] as const)('second route: direct convolution over the whole past, %s', (_, more) => {
  const model = syntheticModel({ inputs: ['valve'], seed: 5, ...more });

  test.each([1, 2, 30, 200])('features and path agree after %i ticks', (ticks) => {
    const readings = syntheticReadings(model, ticks, 7);
    const state = run(model, readings);
    const past = (c: number): number[] => readings.map((values) => (values[c] - model.mean[c]) / model.scale[c]);
    const features = [0, 1, 2].flatMap((c) => slowFeatures(model, past(c), c));
    // Tolerance: rounding of 40,000 additions of numbers near one.
    features.forEach((feature, k) => {
      expect(Math.abs(feature - linearCore(state).features[k])).toBeLessThan(1e-10);
    });
    for (const i of [0, 1]) {
      const slow = slowPath(model, features, i, past(i)[ticks - 1]);
      const fast = pathOf(model, state).subarray(i * model.horizon, (i + 1) * model.horizon);
      slow.forEach((z, h) => {
        expect(Math.abs(model.mean[i] + model.scale[i] * z - fast[h])).toBeLessThan(1e-9);
      });
    }
  });

  test('the comparison notices a feature left out', () => {
    const readings = syntheticReadings(model, 50, 7);
    const state = run(model, readings);
    const past = readings.map((values) => (values[0] - model.mean[0]) / model.scale[0]);
    const wrong = slowFeatures({ ...model, lags: Int32Array.of(2, 3, 4, 23, 24, 25) }, past, 0);
    expect(wrong.some((feature, k) => Math.abs(feature - linearCore(state).features[k]) > 1e-3)).toBe(true);
  });

  test('the comparison notices an own part left out', () => {
    const readings = syntheticReadings(model, 50, 7);
    const { own, ...without } = model;
    const apart = pathOf(model, run(model, readings)).map((y, k) => y - pathOf(without, run(without, readings))[k]);
    expect(apart.some((value) => Math.abs(value) > 1e-3)).toBe(own !== undefined);
  });
});

describe('forecasts', () => {
  const model = syntheticModel({ inputs: ['valve'] });

  test('a constant past forecasts itself, to the bit', () => {
    const readings = Array.from({ length: 500 }, () => Float64Array.of(11, 14, 17));
    const state = createState(model);
    for (const [n, values] of readings.entries()) {
      update(model, state, n, values);
      if (n === 0) expect(linearCore(state).features.every((feature) => feature === 0)).toBe(true);
    }
    const flat = pathOf(model, state);
    for (let h = 0; h < model.horizon; h++) expect(flat[h]).toBeCloseTo(11, 9);
  });

  test('step 1 of the path is predictNext, and stands in for a missing reading', () => {
    const readings = syntheticReadings(model, 100, 3, 0.3);
    const state = createState(model);
    const next = new Float64Array(3);
    readings.forEach((values, n) => {
      const path = n === 0 ? null : pathOf(model, state);
      if (path) predictNext(model, state, next);
      const before = Float64Array.from(next);
      update(model, state, n, values);
      if (!path) return;
      expect(before[0]).toBe(path[0]);
      expect(before[1]).toBe(path[model.horizon]);
      for (let c = 0; c < 3; c++) {
        const folded = model.mean[c] + model.scale[c] * state.value[c];
        if (Number.isNaN(values[c])) expect(folded).toBe(before[c]);
      }
    });
  });

  test('inputs are forecast, and replaced when missing, by their last value', () => {
    const readings = syntheticReadings(model, 20, 3);
    const state = run(model, readings);
    const held = state.value[2];
    const next = new Float64Array(3);
    predictNext(model, state, next);
    expect(next[2]).toBe(model.mean[2] + model.scale[2] * held);
    update(model, state, 20, Float64Array.of(10, 13, Number.NaN));
    expect(state.value[2]).toBe(held);
  });

  test('a long gap keeps its distance for one horizon, then fades linearly to the seasonal mean', () => {
    const calm = { ...model, readout: new Float64Array(model.readout.length) };
    const state = run(calm, [Float64Array.of(14, 13, 16)]);
    const H = calm.horizon;
    const start = state.value[0];
    const absent = new Float64Array(3).fill(Number.NaN);
    const seasonal = (tick: number): number => calm.seasonal[Math.floor(((tick % 24) * 24) / 24)];
    for (let age = 1; age <= 2 * H + 5; age++) {
      update(calm, state, age, absent);
      if (age <= H) expect(state.value[0]).toBe(start);
      if (age >= 2 * H) expect(state.value[0]).toBe(seasonal(age));
    }
    // The path itself shows the fade too: issued at age H, distance (H − h)/H is left at step h.
    const fresh = run(calm, [Float64Array.of(14, 13, 16)]);
    for (let age = 1; age <= H; age++) update(calm, fresh, age, absent);
    const path = pathOf(calm, fresh);
    for (let h = 1; h <= H; h++) {
      const mean = seasonal(H + h);
      const expected = mean + ((H - h) / H) * (start - mean);
      expect((path[h - 1] - calm.mean[0]) / calm.scale[0]).toBeCloseTo(expected, 12);
    }
  });

  test('with a horizon of one tick, a reading missed does not throw the forecast onto the seasonal mean', () => {
    const short = syntheticModel({ inputs: ['valve'], horizon: 1 });
    const calm = { ...short, readout: new Float64Array(short.readout.length) };
    const state = run(calm, [Float64Array.of(14, 13, 16)]);
    const start = state.value[0];
    const absent = new Float64Array(3).fill(Number.NaN);
    for (let age = 1; age <= 8; age++) {
      update(calm, state, age, absent);
      expect(state.value[0]).toBe(start);
    }
    for (let age = 9; age <= 16; age++) update(calm, state, age, absent);
    expect(state.value[0]).toBe(calm.seasonal[16]);
    expect(restoreState(calm, saveState(calm, state)).value).toEqual(state.value);
  });

  test('the distance falls by the same amount every tick, on the path as in the state', () => {
    const level = {
      ...model,
      readout: new Float64Array(model.readout.length),
      seasonalPeriod: 0,
      seasonalBins: 1,
      seasonal: Float64Array.of(0.5, -0.5),
    };
    const H = level.horizon;
    const state = run(level, [Float64Array.of(14, 13, 16)]);
    const start = state.value[0] - 0.5;
    const left = (age: number): number => Math.max(0, 2 * H - Math.max(H, age)) / H;
    for (let age = 1; age <= 2 * H + 3; age++) {
      update(level, state, age, new Float64Array(3).fill(Number.NaN));
      expect(state.value[0] - 0.5).toBeCloseTo(start * left(age), 12);
      const path = pathOf(level, state);
      for (let h = 1; h <= H; h++) {
        expect((path[h - 1] - level.mean[0]) / level.scale[0] - 0.5).toBeCloseTo(start * left(age + h), 12);
      }
    }
  });

  test('forecasts stay inside the clips', () => {
    const wild = { ...model, readout: model.readout.map((weight) => 1e6 * weight) };
    const state = run(wild, syntheticReadings(wild, 50, 9));
    const path = pathOf(wild, state);
    expect(path.some((y) => y === wild.clipLow[0] || y === wild.clipHigh[0])).toBe(true);
    for (const [k, y] of path.entries()) {
      const i = Math.floor(k / wild.horizon);
      expect(y >= wild.clipLow[i] && y <= wild.clipHigh[i]).toBe(true);
    }
  });
});
