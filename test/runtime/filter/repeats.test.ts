/** Sensors that hang: counted, taken for missing, leaned on while they may last, let go at the first change. */
import {
  checkModel,
  createState,
  FilterError,
  type FilterState,
  FOLDED,
  forecastPath,
  type LinearModel,
  MISSING,
  predictNext,
  restoreState,
  STUCK,
  saveState,
  standsStill,
  update,
} from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { syntheticModel, syntheticReadings } from '../../support/models.ts';

const plain = syntheticModel({ inputs: ['valve'], seed: 5, horizon: 12 });
const guarded: LinearModel = {
  ...plain,
  stuck: { ticks: Int32Array.of(4, 0), rests: [Float64Array.of(7.5), new Float64Array(0)], acts: true },
};
const moving = syntheticReadings(guarded, 60, 3);

/** Runs the moving readings, then signal 0 as given; what became of each of those. */
function standing(model: LinearModel, values: readonly number[], state = createState(model)): [number[], FilterState] {
  for (const row of moving) update(model, state, state.tick + 1, row);
  const seen = values.map((value, n) => {
    const row = Float64Array.from(moving[n % moving.length]);
    row[0] = value;
    update(model, state, state.tick + 1, row);
    return state.observed[0];
  });
  return [seen, state];
}

const pathOf = (model: LinearModel, state: FilterState): Float64Array => {
  const median = new Float64Array(model.signalCount * model.horizon);
  forecastPath(model, state, median);
  return median;
};

describe('a signal that repeats itself', () => {
  test('counts as missing from the fourth reading alike on, and is taken again at the first change', () => {
    const [seen] = standing(guarded, [10, 10, 10, 10, 10, 10.5, 10.5]);
    expect(seen).toEqual([FOLDED, FOLDED, FOLDED, STUCK, STUCK, FOLDED, FOLDED]);
  });

  test('a reading that is missing in between neither ends the run nor makes it longer', () => {
    const [seen] = standing(guarded, [10, 10, Number.NaN, 10, Number.NaN, 10]);
    expect(seen).toEqual([FOLDED, FOLDED, MISSING, FOLDED, MISSING, STUCK]);
  });

  test('may rest at its resting value, and another signal and an input for ever', () => {
    const [seen, state] = standing(guarded, [7.5, 7.5, 7.5, 7.5, 7.5, 7.5]);
    expect(seen.every((one) => one === FOLDED)).toBe(true);
    for (let n = 0; n < 20; n++) update(guarded, state, state.tick + 1, Float64Array.of(10 + 0.01 * n, 12, 3));
    expect(Array.from(state.observed)).toEqual([FOLDED, FOLDED, FOLDED]);
  });

  test('moves the memories as missing readings do', () => {
    const [, hung] = standing(guarded, [10, 10, 10, 10, 10, 10]);
    const [, missing] = standing(plain, [10, 10, 10, Number.NaN, Number.NaN, Number.NaN]);
    expect(Array.from(hung.value)).toEqual(Array.from(missing.value));
    expect(Array.from(hung.age)).toEqual(Array.from(missing.age));
  });

  test('its path leans on the standing reading by the square of n / (n + h), one step ahead alone it does not', () => {
    const [, state] = standing(guarded, [10, 10, 10, 10, 10, 10]);
    const leaned = pathOf(guarded, state);
    const free = pathOf({ ...guarded, stuck: { ...guarded.stuck!, acts: false } }, state);
    for (let h = 1; h <= guarded.horizon; h++) {
      const share = (6 / (6 + h)) ** 2;
      expect(leaned[h - 1]).toBeCloseTo(free[h - 1] + share * (10 - free[h - 1]), 12);
      expect(leaned[guarded.horizon + h - 1]).toBe(free[guarded.horizon + h - 1]);
    }
    const next = new Float64Array(3);
    predictNext(guarded, state, next);
    expect(next[0]).toBe(free[0]);
  });

  test('is only told where the guard does not act', () => {
    const telling = { ...guarded, stuck: { ...guarded.stuck!, acts: false } };
    const [seen, state] = standing(telling, [10, 10, 10, 10, 10]);
    expect(seen.every((one) => one === FOLDED)).toBe(true);
    expect([0, 1, 2].map((c) => standsStill(telling, state, c))).toEqual([true, false, false]);
    const [, free] = standing(plain, [10, 10, 10, 10, 10]);
    expect(pathOf(telling, state)).toEqual(pathOf(plain, free));
  });
});

test('stopped and restored in the middle of a run it goes on to the bit', () => {
  for (const before of [1, 3, 5]) {
    const [, whole] = standing(guarded, new Array<number>(before).fill(10));
    const restored = restoreState(guarded, saveState(guarded, whole));
    expect(pathOf(guarded, restored)).toEqual(pathOf(guarded, whole));
    for (const state of [whole, restored]) {
      for (let n = 0; n < 3; n++) update(guarded, state, state.tick + 1, Float64Array.of(10, 12, 3));
    }
    expect(saveState(guarded, restored)).toEqual(saveState(guarded, whole));
    expect(restored.observed[0]).toBe(whole.observed[0]);
  }
  expect(() => restoreState(plain, saveState(guarded, createState(guarded)))).toThrow(FilterError);
});

test.each([
  ['stuck.ticks', { ticks: Int32Array.of(4), rests: [], acts: true }],
  ['stuck.ticks[1]', { ticks: Int32Array.of(4, 1), rests: [new Float64Array(0), new Float64Array(0)], acts: true }],
  ['stuck.rests', { ticks: Int32Array.of(4, 4), rests: [new Float64Array(0)], acts: true }],
  [
    'stuck.rests[0][0]',
    { ticks: Int32Array.of(4, 4), rests: [Float64Array.of(Number.NaN), new Float64Array(0)], acts: true },
  ],
])('checkModel refuses %s', (field, stuck) => {
  try {
    checkModel({ ...plain, stuck });
  } catch (error) {
    expect((error as FilterError).details.field).toBe(field);
    return;
  }
  throw new Error('was taken');
});
