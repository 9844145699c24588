import { describe, expect, test } from 'vitest';
import { checkModel } from '../../../runtime/filter/check.ts';
import { forecastPath } from '../../../runtime/filter/forecast.ts';
import type { LinearModel } from '../../../runtime/filter/model.ts';
import { runProbe } from '../../../runtime/filter/probe.ts';
import { expectInput, lookAtPaths, type ResponseModel } from '../../../runtime/filter/response.ts';
import { createState, type FilterState } from '../../../runtime/filter/state.ts';
import { update } from '../../../runtime/filter/update.ts';
import { seededNumbers, syntheticModel, syntheticReadings } from '../../support/models.ts';

const H = 12;
const choice = { signals: ['level', 'flow'], inputs: ['pump', 'valve'], horizon: H } as const;
const plain = syntheticModel(choice);
const planned = syntheticModel({ ...choice, response: true });

const stateAfter = (model: LinearModel, ticks: number): FilterState => {
  const state = createState(model);
  for (const [n, readings] of syntheticReadings(model, ticks, 3, 0.05).entries()) update(model, state, n, readings);
  return state;
};
const pathOf = (model: LinearModel, state: FilterState, plan: Float64Array | null = null): Float64Array => {
  const median = new Float64Array(model.signalCount * model.horizon);
  forecastPath(model, state, median, plan);
  return median;
};
/** What the past says of both inputs, (nu × H). */
const expectedOf = (model: LinearModel, state: FilterState): Float64Array => {
  const { response } = model;
  const buffers = state.response!;
  // Standardised paths before fading and clipping; these synthetic ones do neither.
  const paths = pathOf(model, state).map((y, k) => {
    const i = Math.floor(k / H);
    return (y - model.mean[i]!) / model.scale[i]!;
  });
  lookAtPaths(model, response!, buffers, state, paths);
  const out = new Float64Array(2 * H);
  for (let u = 0; u < 2; u++) {
    expectInput(model, response!, buffers, state, u);
    out.set(buffers.expected, u * H);
  }
  return out;
};

describe('without a plan', () => {
  test('the response changes nothing, to the bit', () => {
    const state = stateAfter(planned, 60);
    expect(pathOf(planned, state)).toEqual(pathOf(plain, stateAfter(plain, 60)));
    expect(pathOf(planned, state, new Float64Array(2 * H).fill(Number.NaN))).toEqual(pathOf(planned, state));
  });

  test('a plan reaches no model without a response', () => {
    const state = stateAfter(plain, 60);
    expect(pathOf(plain, state, new Float64Array(2 * H).fill(3))).toEqual(pathOf(plain, state));
  });
});

/** The formulas of the file head, written out over plain arrays: a second route. */
const byFormula = (model: LinearModel, state: FilterState, plan: Float64Array): Float64Array => {
  const { decays, delay, gain, inputs } = model.response as ResponseModel;
  const expected = expectedOf(model, state);
  const out = pathOf(model, state);
  for (let u = 0; u < inputs.length; u++) {
    const s: number[] = [];
    for (let h = 0; h < H; h++) {
      const value = plan[u * H + h]!;
      s.push(Number.isNaN(value) ? (s[h - 1] ?? 0) : value - expected[u * H + h]!);
    }
    const mean = (a: number) =>
      s.map((_, h) => s.slice(0, h + 1).reduce((sum, v, k) => sum + (1 - a) * a ** (h - k) * v, 0));
    const sums = s.map((_, h) => s.slice(0, h + 1).reduce((sum, v) => sum + v, 0) / H);
    [s, ...Array.from(decays, mean), sums].forEach((e, b) => {
      for (let i = 0; i < model.signalCount; i++) {
        const late = delay[i * inputs.length + u]!;
        const weight = gain[(i * inputs.length + u) * (decays.length + 2) + b]!;
        for (let h = late; h < H; h++) out[i * H + h]! += model.scale[i]! * weight * e[h - late]!;
      }
    });
  }
  return out;
};

describe('with a plan', () => {
  test('that says what is expected nothing changes, to the bit', () => {
    const state = stateAfter(planned, 60);
    const before = pathOf(planned, state);
    // Looked at on the way, so that not even the last bit of the looks differs.
    pathOf(planned, state, new Float64Array(2 * H).fill(Number.NaN));
    const plan = new Float64Array(2 * H);
    for (let u = 0; u < 2; u++) {
      expectInput(planned, planned.response!, state.response!, state, u);
      plan.set(state.response!.expected, u * H);
    }
    expect(pathOf(planned, state, plan)).toEqual(before);
  });

  test('the path is what the formulas say, also of a plan that begins late, ends early or has one input alone', () => {
    const random = seededNumbers(5);
    const state = stateAfter(planned, 60);
    for (const [from, to, inputs] of [
      [0, H, 2],
      [3, H, 2],
      [0, 5, 2],
      [2, 3, 1],
    ] as const) {
      const plan = new Float64Array(2 * H).fill(Number.NaN);
      for (let u = 0; u < inputs; u++) for (let h = from; h < to; h++) plan[u * H + h] = 2 * random() - 1;
      const wanted = byFormula(planned, state, plan);
      // Rounding of a few dozen products of numbers near one; units near ten.
      const path = pathOf(planned, state, plan);
      for (let k = 0; k < path.length; k++) expect(path[k]).toBeCloseTo(wanted[k]!, 10);
      expect(pathOf(planned, state, plan)).not.toEqual(pathOf(planned, state));
    }
  });

  test('beyond the clips every path is finite and inside them', () => {
    const state = stateAfter(planned, 60);
    for (const extreme of [1e300, -1e300, Number.MAX_VALUE, Number.POSITIVE_INFINITY]) {
      const path = pathOf(planned, state, new Float64Array(2 * H).fill(extreme));
      path.forEach((value, k) => {
        const i = Math.floor(k / H);
        expect(value >= planned.clipLow[i]! && value <= planned.clipHigh[i]!).toBe(true);
      });
    }
  });

  test('the probe runs under one', () => {
    const { outputs } = runProbe(planned, 5, 64);
    expect(outputs).toEqual(runProbe(planned, 5, 64).outputs);
    expect(outputs).not.toEqual(runProbe(plain, 5, 64).outputs);
  });
});

describe('refused', () => {
  const response = planned.response!;
  test.each<[string, Partial<ResponseModel>, RegExp]>([
    [
      'an input that is not there',
      { inputs: Int32Array.of(0, 2) },
      /response\.inputs\[1\]: expected ascending, 1 to 1, got 2/,
    ],
    [
      'a pole of one',
      { decays: Float64Array.of(0.5, 0.8, 1) },
      /response\.decays\[2\]: expected more than 0 and less than 1/,
    ],
    [
      'a delay past the horizon',
      { delay: Int32Array.of(0, 0, 0, H) },
      /response\.delay\[3\]: expected 0 to 11, got 12/,
    ],
    ['a look past the horizon', { looks: Int32Array.of(1, H + 1) }, /response\.looks\[1\]/],
    ['gains too few', { gain: response.gain.slice(1) }, /response\.gain: expected 20 numbers, got 19 numbers/],
    [
      'a gain that is not finite',
      { gain: response.gain.map((g, k) => (k === 2 ? Number.NaN : g)) },
      /response\.gain\[2\]/,
    ],
    ['half a curve', { basis: response.basis.slice(H) }, /response\.basis/],
  ])('%s', (_, part, message) => {
    expect(() => checkModel({ ...planned, response: { ...response, ...part } })).toThrow(message);
  });
});
