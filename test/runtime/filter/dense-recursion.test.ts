/** The dense kind: against its recursion unrolled, at rest, without readings, stopped and restored, and refused. */
import {
  checkModel,
  createState,
  type DenseModel,
  FilterError,
  type FilterState,
  forecastPath,
  modelFromBundle,
  restoreState,
  saveState,
  update,
} from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { type DenseChoice, syntheticDense, syntheticDenseBundle } from '../../support/dense-models.ts';
import { syntheticReadings } from '../../support/models.ts';

const run = (model: DenseModel, readings: readonly Float64Array[], state = createState(model)): FilterState => {
  for (const values of readings) update(model, state, state.tick + 1, values);
  return state;
};
const pathOf = (model: DenseModel, state: FilterState): Float64Array => {
  const median = new Float64Array(model.signalCount * model.horizon);
  forecastPath(model, state, median);
  return median;
};

/** x(t) = Σ_j A^j B Δ(t − j), each power of a pole by its polar form; then the read-out by plain loops. */
function slowPath(model: DenseModel, past: readonly (readonly number[])[], signal: number): number[] {
  const {
    order: d,
    pairCount,
    poles,
    drive,
    channelCount: nc,
    basisCount: r,
    horizon,
    lags,
    lagged,
    signalCount,
  } = model;
  const t = past[0].length - 1;
  const change = (c: number, j: number): number => (t - j <= 0 ? 0 : past[c][t - j] - past[c][t - j - 1]);
  const x = new Array<number>(d).fill(0);
  for (let j = 0; j <= t; j++) {
    const push = (k: number): number => past.reduce((sum, _, c) => sum + drive[k * nc + c] * change(c, j), 0);
    for (let k = 0; k < 2 * pairCount; k += 2) {
      const size = Math.hypot(poles[k], poles[k + 1]) ** j;
      const angle = Math.atan2(poles[k + 1], poles[k]) * j;
      x[k] += size * (Math.cos(angle) * push(k) - Math.sin(angle) * push(k + 1));
      x[k + 1] += size * (Math.sin(angle) * push(k) + Math.cos(angle) * push(k + 1));
    }
    for (let k = 2 * pairCount; k < d; k++) x[k] += poles[k] ** j * push(k);
  }
  const seen = model.hasLevel === true ? [...x, ...past.map((z) => -z[t])] : x;
  const now = past[signal][t];
  const S = lagged.length / (signalCount * Math.max(1, lags.length));
  return Array.from({ length: horizon }, (_, h) => {
    let sum = now;
    for (let k = 0; k < r; k++) {
      const row = (signal * r + k) * seen.length;
      const coefficient = seen.reduce((all, value, s) => all + value * model.readout[row + s], 0);
      sum += model.horizonBasis[h * r + k] * coefficient;
    }
    lags.forEach((lag, k) => {
      if (h < S) sum += lagged[(signal * S + h) * lags.length + k] * (past[signal][Math.max(0, t - lag)] - now);
    });
    return sum;
  });
}

const SHAPES: readonly [string, DenseChoice][] = [
  ['pairs and real poles, lags', { order: 7, pairs: 2 }],
  ['pairs alone', { order: 6, pairs: 3, lags: [] }],
  ['real poles alone, the level', { order: 5, pairs: 0, level: true }],
  ['one step, one number', { order: 1, pairs: 0, horizon: 1, basis: 1, lagSteps: 1 }],
];

describe.each(SHAPES)('%s', (_, choice) => {
  const model = syntheticDense({ inputs: ['valve'], seed: 6, ...choice });

  test.each([1, 2, 40, 300])('second route: the recursion unrolled, after %i ticks', (ticks) => {
    const readings = syntheticReadings(model, ticks, 8);
    const state = run(model, readings);
    const past = [0, 1, 2].map((c) => readings.map((values) => (values[c] - model.mean[c]) / model.scale[c]));
    for (const i of [0, 1]) {
      const fast = pathOf(model, state).subarray(i * model.horizon, (i + 1) * model.horizon);
      slowPath(model, past, i).forEach((z, h) => {
        const inside = Math.min(model.clipHigh[i], Math.max(model.clipLow[i], model.mean[i] + model.scale[i] * z));
        // Tolerance: rounding of a few hundred powers and sums of numbers near one.
        expect(Math.abs(inside - fast[h])).toBeLessThan(1e-10);
      });
    }
  });

  test('at rest it stays at rest, at any level', () => {
    const still = syntheticDense({ inputs: ['valve'], seed: 6, ...choice, level: undefined as never });
    const readings = Array.from({ length: 50 }, () => Float64Array.from(still.mean, (m, c) => m + c + 0.5));
    const state = run(still, readings);
    expect(state.x.every((value) => value === 0)).toBe(true);
    pathOf(still, state).forEach((y, k) => {
      expect(y).toBeCloseTo(readings[0][Math.floor(k / still.horizon)], 12);
    });
  });

  test('without any reading it fades to the seasonal mean and forgets', () => {
    const state = run(model, syntheticReadings(model, 200, 9));
    const none = new Float64Array(model.channelCount).fill(Number.NaN);
    const silent = Math.ceil(4 * Math.max(model.horizon, 8)) + 400;
    run(
      model,
      Array.from({ length: silent }, () => none),
      state,
    );
    const before = Float64Array.from(state.value);
    run(
      model,
      Array.from({ length: 24 }, () => none),
      state,
    );
    for (const i of [0, 1]) expect(state.value[i]).toBeCloseTo(before[i], 12);
    expect(state.x.every((value) => Math.abs(value) < 5)).toBe(true);
  });

  test('stopped and restored it goes on to the bit, and equal states are equal bytes', () => {
    const readings = syntheticReadings(model, 120, 10, 0.2);
    for (const stop of [1, 37, 90]) {
      const whole = run(model, readings.slice(0, stop));
      const restored = restoreState(model, saveState(model, whole));
      expect(pathOf(model, restored)).toEqual(pathOf(model, whole));
      run(model, readings.slice(stop), whole);
      run(model, readings.slice(stop), restored);
      expect(pathOf(model, restored)).toEqual(pathOf(model, whole));
      expect(saveState(model, restored)).toEqual(saveState(model, whole));
    }
  });
});

test('the second route notices a pole turned the other way', () => {
  const model = syntheticDense({ inputs: ['valve'], seed: 6, order: 7, pairs: 2 });
  const readings = syntheticReadings(model, 40, 8);
  const past = [0, 1, 2].map((c) => readings.map((values) => (values[c] - model.mean[c]) / model.scale[c]));
  const turned = { ...model, poles: model.poles.map((value, k) => (k === 1 ? -value : value)) };
  const right = slowPath(model, past, 0);
  expect(slowPath(turned, past, 0).some((z, h) => Math.abs(z - right[h]) > 1e-4)).toBe(true);
});

describe('checkModel refuses', () => {
  const model = syntheticDense({ order: 7, pairs: 2 });
  const bad = (values: Float64Array, at: number, value: number): Float64Array => {
    const copy = Float64Array.from(values);
    copy[at] = value;
    return copy;
  };
  const cases: readonly [string, Partial<DenseModel>][] = [
    ['pairCount', { pairCount: 4 }],
    ['poles', { poles: model.poles.subarray(1) }],
    ['poles[5]', { poles: bad(model.poles, 5, 1) }],
    ['poles[6]', { poles: bad(model.poles, 6, Number.NaN) }],
    ['poles[0]', { poles: bad(bad(model.poles, 0, 0.8), 1, 0.7) }],
    ['drive', { drive: model.drive.subarray(1) }],
    ['drive[3]', { drive: bad(model.drive, 3, Number.POSITIVE_INFINITY) }],
    ['readout', { hasLevel: true }],
    ['horizonBasis', { basisCount: 3, readout: new Float64Array(2 * 3 * 7) }],
    ['lags[1]', { lags: Int32Array.of(1, 1, 24) }],
    ['lagged', { lagged: new Float64Array(5) }],
    ['lagged', { lagged: new Float64Array(0) }],
    ['lagged[4]', { lagged: bad(model.lagged, 4, Number.NaN) }],
  ];

  test.each(cases)('%s', (field, change) => {
    try {
      checkModel({ ...model, ...change });
    } catch (error) {
      expect(error).toBeInstanceOf(FilterError);
      expect((error as FilterError).details.field).toBe(field);
      return;
    }
    throw new Error('was taken');
  });

  test('a bundle that names the kind and has no tensors of it', () => {
    const { dense: _dense, ...without } = syntheticDenseBundle();
    expect(() => modelFromBundle(without)).toThrow(/expected the tensors of its kind, "dense"/);
  });
});
