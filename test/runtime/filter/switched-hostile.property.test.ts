/** Whatever readings come, every number of the switched kind stays finite and its bounds in order. */
import {
  createBounds,
  createState,
  forecastPath,
  intervalOf,
  predictNext,
  type SwitchedModel,
  trackBounds,
  update,
} from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { checkModel } from '../../../runtime/filter/check.ts';
import type { SwitchedKernelCore } from '../../../runtime/filter/switched.ts';
import { seededNumbers } from '../../support/models.ts';
import { tankModel } from '../../support/switched-model.ts';

const HOSTILE = [
  Number.NaN,
  Number.POSITIVE_INFINITY,
  Number.NEGATIVE_INFINITY,
  1e308,
  -1e308,
  5e-324,
  -0,
  1e15,
  8,
  2,
  1.5,
  0,
];

/** Sum of x − x: 0 while all are finite. */
const strayed = (parts: readonly Float64Array[]): number => {
  let sum = 0;
  for (const part of parts) for (let k = 0; k < part.length; k++) sum += part[k] - part[k];
  return sum;
};

function survive(model: SwitchedModel, ticks: number, next: (t: number, c: number) => number): void {
  const state = createState(model);
  const bounds = createBounds(model);
  const size = model.signalCount * model.horizon;
  const [median, lower, upper] = [new Float64Array(size), new Float64Array(size), new Float64Array(size)];
  const predicted = new Float64Array(model.channelCount);
  const { section } = state.core as SwitchedKernelCore;
  for (let t = 0; t < ticks; t++) {
    update(
      model,
      state,
      t,
      Float64Array.from({ length: model.channelCount }, (_, c) => next(t, c)),
    );
    predictNext(model, state, predicted);
    forecastPath(model, state, median);
    trackBounds(model, bounds, state, median);
    intervalOf(model, bounds, state, median, lower, upper);
    if (strayed([section.memory, section.features, section.next, median, lower, upper, predicted]) !== 0) {
      throw new Error(`not finite at tick ${t}`);
    }
    const beliefs = section.memory.subarray(section.beliefAt, section.beliefAt + model.switched.modeCount);
    expect(beliefs.reduce((sum, one) => sum + one, 0)).toBeCloseTo(1, 9);
    for (let k = 0; k < size; k++)
      if (!(lower[k] <= median[k] && median[k] <= upper[k])) throw new Error(`bounds at ${t}`);
  }
}

describe('finite, always', () => {
  const model = tankModel();
  const { switched } = model;
  const wild: SwitchedModel = {
    ...model,
    switched: {
      ...switched,
      drift: switched.drift.map((value) => value * 1e8),
      landing: switched.landing.map((value) => value * 1e8),
      hazard: switched.hazard.map((value) => value * 1e6),
      outlook: switched.outlook.map((value) => value * 1e6),
      doubt: switched.doubt.map((value) => value * 1e6),
    },
  };

  test.each([
    ['as learned', model],
    ['with wild weights', wild],
  ] as const)('%s, hostile readings', (_, own) => {
    checkModel(own);
    const random = seededNumbers(99);
    survive(own, 1500, () => HOSTILE[Math.floor(random() * HOSTILE.length)]);
  });

  test('without readings from the start, and after a while', () => {
    survive(model, 200, () => Number.NaN);
    survive(model, 300, (t, c) => (t < 50 ? [1.5, 8][c] : Number.NaN));
  });

  test('the watch itself sees a number that is not finite', () => {
    expect(strayed([Float64Array.of(1, Number.POSITIVE_INFINITY)])).not.toBe(0);
  });
});
