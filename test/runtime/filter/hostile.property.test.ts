/** Whatever readings come, every number stays finite: a million of them, from denormals to 1e308. */
import {
  createBounds,
  createState,
  crossing,
  forecastPath,
  intervalOf,
  type LinearModel,
  type Model,
  predictNext,
  trackBounds,
  update,
} from '@stillwell/runtime/filter';
import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { syntheticDense } from '../../support/dense-models.ts';
import { seededNumbers, syntheticModel } from '../../support/models.ts';

const HOSTILE = [
  Number.NaN,
  Number.POSITIVE_INFINITY,
  Number.NEGATIVE_INFINITY,
  1e308,
  -1e308,
  Number.MAX_VALUE,
  -Number.MAX_VALUE,
  5e-324,
  -5e-324,
  0,
  -0,
  1e-308,
  9007199254740992,
  -1e15,
  10,
  12,
  13.5,
];

/** Sum of x − x over the buffers: 0 while all are finite, NaN from the first that is not. */
const strayed = (parts: readonly Float64Array[]): number => {
  let sum = 0;
  for (const part of parts) for (let k = 0; k < part.length; k++) sum += part[k] - part[k];
  return sum;
};

/** Every array of numbers that a kind computes with. */
const buffersOf = (core: object): Float64Array[] => Object.values(core).filter((part) => part instanceof Float64Array);

const survive = (model: Model, ticks: number, next: (n: number, c: number) => number): void => {
  const state = createState(model);
  const bounds = createBounds(model);
  const size = model.signalCount * model.horizon;
  const [median, lower, upper] = [new Float64Array(size), new Float64Array(size), new Float64Array(size)];
  const predicted = new Float64Array(model.channelCount);
  const readings = new Float64Array(model.channelCount);
  const plan = new Float64Array((model.channelCount - model.signalCount) * model.horizon);
  const watched = [state.value, ...buffersOf(state.core), median, lower, upper, predicted, bounds.radius];
  for (let n = 0; n < ticks; n++) {
    for (let c = 0; c < readings.length; c++) readings[c] = next(n, c);
    update(model, state, n, readings);
    predictNext(model, state, predicted);
    // What was hostile as readings is hostile as a plan; models without a response pass it over.
    for (let k = 0; k < plan.length; k++) plan[k] = HOSTILE[(n * 7 + k * k) % HOSTILE.length];
    forecastPath(model, state, median, model.response === undefined ? null : plan);
    trackBounds(model, bounds, state, median);
    intervalOf(model, bounds, state, median, lower, upper);
    if (strayed(watched) !== 0) throw new Error(`not finite at tick ${n}, readings ${readings}`);
    if (n % 64 === 0) {
      for (const side of ['above', 'below'] as const) {
        const { probability } = crossing(model, bounds, state, median, 0, HOSTILE[n % 17], side);
        if (Number.isFinite(HOSTILE[n % 17]) && !(probability >= 0 && probability <= 1)) {
          throw new Error(`probability ${probability} at tick ${n}`);
        }
      }
    }
    for (let k = 0; k < size; k++) {
      if (lower[k] > median[k] || median[k] > upper[k]) throw new Error(`bounds crossed at tick ${n}`);
    }
  }
  expect(bounds.radius.every((q) => q > 0)).toBe(true);
};

describe('finite, always', () => {
  const model = syntheticModel({ seed: 3, inputs: ['valve', 'set'], horizon: 6, basis: 3, order: 4, lags: [1, 7] });
  const wild: LinearModel = {
    ...model,
    bottleneck: model.bottleneck.map((w) => w * 1e50),
    readout: model.readout.map((w) => w * 1e50),
    horizonBasis: model.horizonBasis.map((w) => w * 1e50),
  };
  const planned = syntheticModel({
    seed: 3,
    inputs: ['valve', 'set'],
    horizon: 6,
    order: 4,
    lags: [1, 7],
    response: true,
  });
  const response = planned.response!;
  const wildPlanned: LinearModel = {
    ...planned,
    bottleneck: planned.bottleneck.map((w) => w * 1e50),
    response: {
      ...response,
      gain: response.gain.map((w) => w * 1e50),
      readout: response.readout.map((w) => w * 1e50),
      basis: response.basis.map((w) => w * 1e50),
    },
  };
  const dense = syntheticDense({ seed: 3, inputs: ['valve', 'set'], horizon: 6, basis: 3, lags: [1, 7], level: true });
  const wildDense: Model = {
    ...dense,
    poles: dense.poles.map((pole, k) => (k < 2 * dense.pairCount ? pole : 1 - 2 ** -53)),
    drive: dense.drive.map((w) => w * 1e50),
    readout: dense.readout.map((w) => w * 1e50),
    horizonBasis: dense.horizonBasis.map((w) => w * 1e50),
    lagged: dense.lagged.map((w) => w * 1e50),
  };

  test.each([
    ['tame', model],
    ['wild', wild],
    ['planned, tame', planned],
    ['planned, wild', wildPlanned],
    ['dense, tame', dense],
    ['dense, wild', wildDense],
  ] as const)('%s weights, half a million hostile readings', (_, at) => {
    const random = seededNumbers(99);
    survive(at, 125_000, () => HOSTILE[Math.floor(random() * HOSTILE.length)]);
  });

  test.each([
    ['linear', model],
    ['dense', dense],
  ] as const)('any float64 pattern, %s', (_, at) => {
    fc.assert(
      fc.property(fc.array(fc.double(), { minLength: 4, maxLength: 400 }), (values) => {
        survive(at, Math.floor(values.length / 4), (n, c) => values[4 * n + c]);
      }),
      { seed: 20_240_612, numRuns: 200 },
    );
  });

  test('the watch itself sees a number that is not finite', () => {
    expect(strayed([Float64Array.of(1, 2), Float64Array.of(Number.POSITIVE_INFINITY)])).not.toBe(0);
  });
});
