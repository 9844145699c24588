/** The round: exact on what repeats, the same as none at weight 0, finite, and whole again after a snapshot. */
import {
  checkModel,
  createState,
  FilterError,
  forecastPath,
  type LinearModel,
  predictNext,
  restoreState,
  saveState,
  update,
} from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { seededNumbers, syntheticModel, syntheticReadings } from '../../support/models.ts';

const W = 28;
const plain = syntheticModel({ horizon: 7, rejectSd: 1e9, inputs: ['command'] });
const withRound = (weight: readonly number[], base: LinearModel = plain): LinearModel => ({
  ...base,
  round: { ticks: W, weight: Float64Array.from(weight) },
});
const mute = (model: LinearModel): LinearModel => ({ ...model, readout: new Float64Array(model.readout.length) });

/** Path of both signals after every reading, and the state. */
function run(model: LinearModel, readings: readonly Float64Array[]) {
  const state = createState(model);
  const path = new Float64Array(2 * model.horizon);
  for (const [n, row] of readings.entries()) update(model, state, n, row);
  forecastPath(model, state, path);
  return { state, path };
}

describe('the round', () => {
  test('a signal that repeats every round is forecast without error, whatever its shape', () => {
    const random = seededNumbers(5);
    const shape = Array.from({ length: W }, () => 10 + 3 * random());
    const readings = Array.from({ length: 3 * W }, (_, n) => Float64Array.of(shape[n % W]!, 13, 16));
    const { path } = run(mute(withRound([1, 0])), readings);
    for (let h = 1; h <= 7; h++) expect(path[h - 1]).toBeCloseTo(shape[(3 * W - 1 + h) % W]!, 12);
    // Without the round, and with nothing read out, the last value stands: the check can fail.
    expect(run(mute(plain), readings).path[3]).not.toBeCloseTo(shape[(3 * W + 3) % W]!, 3);
  });

  test('it adds what the definition says: path of the rest plus the weighted value a round before', () => {
    const readings = syntheticReadings(plain, 3 * W, 9);
    const { path } = run(withRound([0.5, 0]), readings);
    // Slow route: the rest is made beforehand and filtered by the plain model, its clips out of the way.
    const free = { ...plain, clipLow: plain.clipLow.map(() => -1e9), clipHigh: plain.clipHigh.map(() => 1e9) };
    const z = (n: number): number => (readings[n]![0]! - plain.mean[0]!) / plain.scale[0]!;
    // In the first round, what is not known of the one before counts as the value now.
    const rest = readings.map((row, n) =>
      Float64Array.of(plain.mean[0]! + plain.scale[0]! * (z(n) - 0.5 * z(n < W ? n : n - W)), row[1]!, row[2]!),
    );
    const slow = run(free, rest).path;
    for (let h = 1; h <= 7; h++) {
      const expected = slow[h - 1]! + plain.scale[0]! * 0.5 * z(3 * W - 1 + h - W);
      expect(path[h - 1]).toBeCloseTo(expected, 9);
    }
  });

  test('a spike shows a round later once at most, cut to what the guard lets through, and then never again', () => {
    const guarded = mute(withRound([1, 0], { ...plain, rejectSd: 10, rejectMaxTicks: 3 }));
    const state = createState(guarded);
    const next = new Float64Array(3);
    const off: number[] = [];
    for (let n = 0; n < 6 * W; n++) {
      predictNext(guarded, state, next);
      off.push(Math.abs(next[0]! - 10));
      update(guarded, state, n, Float64Array.of(n === 2 * W + 5 ? 18 : 10, 13, 16));
    }
    const limit = 10 * 0.2 * plain.scale[0]!;
    expect(off[3 * W + 5]).toBeCloseTo(limit, 9);
    expect(Math.max(...off.slice(4 * W))).toBeLessThan(1e-9);
  });

  test('in the first round no reading is passed over, and the last value is the forecast', () => {
    const guarded = mute(withRound([1, 0], { ...plain, rejectSd: 10, rejectMaxTicks: 3 }));
    const state = createState(guarded);
    const next = new Float64Array(3);
    for (let n = 0; n < W; n++) {
      if (n > 1) {
        predictNext(guarded, state, next);
        expect(next[0]).toBeCloseTo((n - 1) % 2 === 0 ? 10 : 16, 9);
      }
      update(guarded, state, n, Float64Array.of(n % 2 === 0 ? 10 : 16, 13, 16));
      expect(state.observed[0]).toBe(1);
    }
  });

  test('weight 0 changes nothing, to the bit', () => {
    const readings = syntheticReadings(plain, 100, 3, 0.2);
    expect(run(withRound([0, 0]), readings).path).toEqual(run(plain, readings).path);
  });

  test('a snapshot at any tick goes on to the same bits, with readings missing', () => {
    const model = withRound([1, 0.5]);
    const readings = syntheticReadings(model, 120, 4, 0.3);
    for (const stop of [1, W - 1, W, W + 1, 77]) {
      const { state } = run(model, readings.slice(0, stop));
      const again = restoreState(model, saveState(model, state));
      expect(saveState(model, again)).toEqual(saveState(model, state));
      const [a, b] = [new Float64Array(3), new Float64Array(3)];
      for (let n = stop; n < 120; n++) {
        update(model, state, n, readings[n]!);
        update(model, again, n, readings[n]!);
      }
      predictNext(model, state, a);
      predictNext(model, again, b);
      expect(b).toEqual(a);
    }
    expect(() => restoreState(plain, saveState(model, createState(model)))).toThrow(FilterError);
  });

  test.each([
    ['round.ticks', { ticks: 6, weight: Float64Array.of(1, 1) }],
    ['round.ticks', { ticks: 2000, weight: Float64Array.of(1, 1) }],
    ['round.weight', { ticks: W, weight: Float64Array.of(1) }],
    ['round.weight[1]', { ticks: W, weight: Float64Array.of(1, Number.NaN) }],
  ])('refuses %s out of range', (field, round) => {
    expect(() => checkModel({ ...plain, round })).toThrow(`model ${field}: expected`);
  });
});
