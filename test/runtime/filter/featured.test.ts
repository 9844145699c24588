/** The featured kind against a plain second computation; its clips, its memory, and what it is without corrections. */
import {
  checkModel,
  createState,
  forecastPath,
  type Model,
  restoreState,
  saveState,
  update,
} from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { syntheticFeatured } from '../../support/feature-models.ts';
import { seededNumbers, syntheticModel } from '../../support/models.ts';

const choice = { inputs: ['pump'], seed: 4 };
const model = syntheticFeatured(choice);

const rows = (ticks: number, seed: number): number[][] => {
  const random = seededNumbers(seed);
  return Array.from({ length: ticks }, () =>
    Array.from({ length: model.channelCount }, (_, c) =>
      random() < 0.05 ? Number.NaN : model.mean[c] + model.scale[c] * (3 * random() - 1.5),
    ),
  );
};

const run = (of: Model, readings: readonly (readonly number[])[]) => {
  const state = createState(of);
  const path = new Float64Array(of.signalCount * of.horizon);
  readings.forEach((row, t) => {
    update(of, state, t, Float64Array.from(row));
  });
  forecastPath(of, state, path);
  return { state, path };
};

const bound = (value: number, limit: number): number => Math.max(-limit, Math.min(limit, value));

test('the path is the linear one and the correction, computed another way', () => {
  const readings = rows(60, 2);
  const plain = run(syntheticModel(choice), readings);
  const values: number[][] = [];
  const state = createState(model);
  readings.forEach((row, t) => {
    update(model, state, t, Float64Array.from(row));
    values.push(Array.from(state.value));
  });
  const path = new Float64Array(model.signalCount * model.horizon);
  forecastPath(model, state, path);
  const seen = [...state.x.subarray(0, 3), ...values.at(-1)!, ...values.at(-2)!, ...values.at(-5)!];
  const clipped = seen.map((value) => bound(value, 4));
  const features = Array.from(model.phases, (phase, j) =>
    Math.cos(
      2 * Math.PI * clipped.reduce((sum, value, k) => sum + model.frequencies[j * clipped.length + k] * value, phase),
    ),
  );
  const regressors = [...Array.from(state.x, (value) => bound(value, 4)), ...features];
  const correction = Array.from(model.offset, (offset, k) =>
    bound(
      regressors.reduce((sum, value, j) => sum + model.projection[k * regressors.length + j] * value, offset),
      4,
    ),
  );
  const r = model.basisCount;
  for (let i = 0; i < model.signalCount; i++) {
    for (let h = 0; h < model.horizon; h++) {
      let added = 0;
      for (let b = 0; b < r; b++) {
        for (let k = 0; k < correction.length; k++) {
          const at = (i * r + b) * correction.length + k;
          added += model.horizonBasis[h * r + b] * model.correctionReadout[at] * correction[k];
        }
      }
      const at = i * model.horizon + h;
      // Missing readings fold the path in, so both filters saw different values; the model's own state is compared with.
      const linear = linearPath(state, i, h);
      const expected = model.mean[i] + model.scale[i] * (linear + added);
      const inside = Math.max(model.clipLow[i], Math.min(model.clipHigh[i], expected));
      expect(path[at]).toBeCloseTo(inside, 8);
    }
  }
  expect(plain.path).not.toEqual(path);
});

/** z(t) + B V x from the predictive state alone. */
function linearPath(state: ReturnType<typeof createState>, i: number, h: number): number {
  const { basisCount: r, order: d, horizonBasis, readout } = model;
  let sum = state.value[i];
  for (let b = 0; b < r; b++) {
    for (let k = 0; k < d; k++) sum += horizonBasis[h * r + b] * readout[(i * r + b) * d + k] * state.x[k];
  }
  return sum;
}

describe('the correction', () => {
  test('of no weight leaves the linear kind, to the bit', () => {
    const silent = { ...model, correctionReadout: model.correctionReadout.map(() => 0) };
    const readings = rows(80, 5);
    expect(run(silent, readings).path).toEqual(run(syntheticModel(choice), readings).path);
  });

  test('is bounded however wild its weights', () => {
    const wild = { ...model, projection: model.projection.map((value) => 1e30 * value) };
    const tame = syntheticModel(choice);
    const readings = rows(40, 6).map((row) => row.map((value) => (Number.isNaN(value) ? 0 : value)));
    const [a, b] = [run(wild, readings).path, run(tame, readings).path];
    let most = 0;
    for (let k = 0; k < model.correctionReadout.length; k++) most += 4 * Math.abs(model.correctionReadout[k]);
    a.forEach((value, k) => {
      const i = Math.floor(k / model.horizon);
      expect(Math.abs(value - b[k]) / model.scale[i]).toBeLessThanOrEqual(most);
    });
  });
});

test('goes on from a snapshot as if it had never stopped, lags included', () => {
  const readings = rows(90, 7);
  const whole = run(model, readings);
  const half = createState(model);
  const feed = (state: ReturnType<typeof createState>, from: number, to: number): void => {
    for (let t = from; t < to; t++) update(model, state, t, Float64Array.from(readings[t]));
  };
  feed(half, 0, 50);
  const restored = restoreState(model, saveState(model, half));
  feed(restored, 50, 90);
  expect(saveState(model, restored)).toEqual(saveState(model, whole.state));
  const path = new Float64Array(whole.path.length);
  forecastPath(model, restored, path);
  expect(path).toEqual(whole.path);
});

test('refuses lags that do not rise, and a channel that is not there', () => {
  expect(() => checkModel({ ...model, summaryLags: Int32Array.of(4, 1) })).toThrow(/summaryLags\[1\]/);
  expect(() => checkModel({ ...model, summaryChannels: Int32Array.of(0, 1, 9) })).toThrow(/summaryChannels\[2\]/);
});
