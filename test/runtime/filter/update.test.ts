import {
  createState,
  FilterError,
  type FilterState,
  FOLDED,
  type LinearModel,
  MISSING,
  PASSED_OVER,
  restoreState,
  saveState,
  update,
} from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { linearCore, syntheticModel, syntheticReadings } from '../../support/models.ts';

const model = syntheticModel({ inputs: ['valve'] });
const settled = (at: LinearModel = model): FilterState => {
  const state = createState(at);
  for (let n = 0; n < 50; n++) update(at, state, n, Float64Array.of(10, 13, 16));
  return state;
};

describe('guard', () => {
  // residualScale 0.2 × rejectSd 10 × scale 1.5 = 3 units
  const judged = (y: number, ticks: number, state = settled()): number[] =>
    Array.from({ length: ticks }, () => {
      update(model, state, state.tick + 1, Float64Array.of(y, 13, 16));
      return state.observed[0];
    });

  test('a spike is passed over three times in a row at most, then taken', () => {
    expect(judged(18.9, 5)).toEqual([PASSED_OVER, PASSED_OVER, PASSED_OVER, FOLDED, FOLDED]);
  });

  test('a plant that keeps jumping opens the guard, and it shuts again only as readings come near', () => {
    const state = settled();
    const swings = Array.from({ length: 12 }, (_, k) => judged(k % 2 === 0 ? 18.9 : 1.1, 1, state)[0]);
    expect(swings).toEqual([PASSED_OVER, PASSED_OVER, PASSED_OVER, ...new Array(9).fill(FOLDED)]);
    expect(state.passed[0]).toBe(3);
    // At rest at 10: the first is still far from 1.1, the others near.
    judged(10, 60, state);
    expect(state.passed[0]).toBe(0);
    expect(judged(18.9, 1, state)).toEqual([PASSED_OVER]);
  });

  test('the limit grows as the root of the ticks without a reading folded in', () => {
    // 4 units: above 3, below 3 √2
    expect(judged(14, 2)).toEqual([PASSED_OVER, FOLDED]);
    const afterGap = settled();
    update(model, afterGap, 50, Float64Array.of(Number.NaN, 13, 16));
    expect(judged(14, 1, afterGap)).toEqual([FOLDED]);
  });

  test('a reading passed over leaves the state as if it were missing, and its innovation told', () => {
    const spiked = settled();
    const gapped = settled();
    update(model, spiked, 50, Float64Array.of(18.9, 13, 16));
    update(model, gapped, 50, Float64Array.of(Number.NaN, 13, 16));
    expect(spiked.value).toEqual(gapped.value);
    expect(linearCore(spiked).coefficients).toEqual(linearCore(gapped).coefficients);
    expect(spiked.innovation[0]).toBeGreaterThan(10 * 0.2);
  });

  test('inputs are never passed over', () => {
    const state = settled();
    update(model, state, 50, Float64Array.of(10, 13, 27));
    expect(state.observed[2]).toBe(FOLDED);
    expect(state.value[2]).toBe((27 - model.mean[2]) / model.scale[2]);
  });
});

describe('missing readings', () => {
  test.each([Number.NaN, Number.POSITIVE_INFINITY, Number.NEGATIVE_INFINITY])('%d counts as missing', (y) => {
    const state = settled();
    update(model, state, 50, Float64Array.of(y, 13, 16));
    expect(state.observed[0]).toBe(MISSING);
    expect(state.innovation[0]).toBeNaN();
    expect(state.reading[0]).toBeNaN();
    expect(state.age[0]).toBe(1);
    expect(state.observed[1]).toBe(FOLDED);
  });

  test('a channel absent from the start begins at its first reading, features at zero', () => {
    const state = createState(model);
    const F = model.featureCount;
    for (let n = 0; n < 40; n++) update(model, state, n, Float64Array.of(Number.NaN, 12 + (n % 3), 16));
    expect(state.started[0]).toBe(0);
    expect(state.age[0]).toBe(2 * model.horizon);
    update(model, state, 40, Float64Array.of(12, 13, 16));
    expect(state.observed[0]).toBe(FOLDED);
    for (let k = 0; k < F; k++) expect(Math.abs(linearCore(state).features[k])).toBeLessThan(1e-12);
  });
});

describe('turns and shapes', () => {
  const codeOf = (act: () => void): string => {
    try {
      act();
    } catch (error) {
      if (error instanceof FilterError) return error.code;
      throw error;
    }
    return 'none';
  };

  test('ticks follow one another, from any first one', () => {
    const state = createState(model);
    const values = Float64Array.of(10, 13, 16);
    expect(codeOf(() => update(model, state, -1, values))).toBe('tick');
    expect(codeOf(() => update(model, state, 0.5, values))).toBe('tick');
    update(model, state, 28_333_333, values);
    expect(codeOf(() => update(model, state, 28_333_333, values))).toBe('tick');
    expect(codeOf(() => update(model, state, 28_333_335, values))).toBe('tick');
    update(model, state, 28_333_334, values);
    expect(codeOf(() => update(model, state, 28_333_335, Float64Array.of(1, 2)))).toBe('shape');
    expect(state.tick).toBe(28_333_334);
  });
});

test('one set of buffers serves for ever', () => {
  const state = createState(model);
  const buffers = Object.values(state).filter((part) => ArrayBuffer.isView(part));
  expect(buffers.length).toBeGreaterThan(10);
  for (const [n, values] of syntheticReadings(model, 300, 4, 0.2).entries()) update(model, state, n, values);
  expect(Object.values(state).filter((part) => ArrayBuffer.isView(part))).toSatisfy((after: unknown[]) =>
    after.every((buffer, k) => buffer === buffers[k]),
  );
});

describe('a jump that is confirmed', () => {
  const model = { ...syntheticModel({ horizon: 6 }), confirmsJumps: true };
  const settledState = () => {
    const state = createState(model);
    for (let n = 0; n < 50; n++) update(model, state, n, Float64Array.of(10, 13));
    return state;
  };

  test('is folded in at its second reading, spikes apart are not', () => {
    const jumped = settledState();
    update(model, jumped, 50, Float64Array.of(16, 13));
    expect(jumped.observed[0]).toBe(2);
    update(model, jumped, 51, Float64Array.of(16.05, 13));
    expect(jumped.observed[0]).toBe(1);
    const spiked = settledState();
    for (const [k, y] of [16, 4.5, 17.5].entries()) {
      update(model, spiked, 50 + k, Float64Array.of(y, 13));
      expect(spiked.observed[0]).toBe(2);
    }
  });

  test('is remembered over a snapshot and a missing tick', () => {
    const state = settledState();
    update(model, state, 50, Float64Array.of(16, 13));
    update(model, state, 51, Float64Array.of(Number.NaN, 13));
    const again = restoreState(model, saveState(model, state));
    for (const one of [state, again]) {
      update(model, one, 52, Float64Array.of(16, 13));
      expect(one.observed[0]).toBe(1);
    }
    expect(saveState(model, again)).toEqual(saveState(model, state));
  });
});
