import type { Bundle } from '@stillwell/protocol';
import { checkModel, FilterError, type LinearModel, modelFromBundle } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { syntheticBundle, syntheticModel } from '../../support/models.ts';

const codeAndField = (act: () => unknown): [string, unknown] => {
  try {
    act();
  } catch (error) {
    if (error instanceof FilterError) return [error.code, error.details.field];
    throw error;
  }
  return ['none', undefined];
};

describe('modelFromBundle', () => {
  const bundle = syntheticBundle({ inputs: ['valve'], seed: 4 });
  const model = modelFromBundle(bundle) as LinearModel;

  test('counts, scaling and weights are the bundle’s', () => {
    expect([model.channelCount, model.signalCount, model.featureCount, model.order, model.basisCount]).toEqual([
      3, 2, 26, 8, 4,
    ]);
    expect(model.clipHigh[2]).toBe(bundle.channels[2].clip[1]);
    const { data, scales } = bundle.linear!.bottleneck;
    const scale = new DataView(scales.buffer).getFloat32(4 * 3, true);
    const weight = new DataView(data.buffer).getInt8(3 * 78 + 10);
    expect(model.bottleneck[3 * 78 + 10]).toBe(weight * scale);
  });

  test('feature scales are exact powers of two, both ways', () => {
    const exponents = new Int8Array(bundle.linear!.featureExponents.data.buffer);
    expect(new Set(exponents).size).toBe(5);
    model.featureScale.forEach((scale, k) => {
      expect(scale).toBe(2 ** exponents[k]);
    });
  });

  test('inputs among the signals are refused', () => {
    const [a, b, c] = bundle.channels;
    const mixed: Bundle = { ...bundle, channels: [a, c, b] };
    expect(codeAndField(() => modelFromBundle(mixed))[0]).toBe('model');
  });
});

describe('checkModel refuses', () => {
  const model = syntheticModel({});
  const bad = (values: Float64Array, at: number, value: number): Float64Array => {
    const copy = Float64Array.from(values);
    copy[at] = value;
    return copy;
  };
  const cases: readonly [string, Partial<LinearModel>][] = [
    ['decays[2]', { decays: bad(model.decays, 2, 1) }],
    ['decays[0]', { decays: bad(model.decays, 0, Number.NaN) }],
    ['resonators[1]', { resonatorRe: bad(model.resonatorRe, 1, 1.2) }],
    ['lags[1]', { lags: Int32Array.of(3, 3, 4, 5, 6, 7) }],
    ['bottleneck', { bottleneck: model.bottleneck.subarray(1) }],
    ['bottleneck[7]', { bottleneck: bad(model.bottleneck, 7, Number.NaN) }],
    ['readout[0]', { readout: bad(model.readout, 0, Number.POSITIVE_INFINITY) }],
    ['horizonBasis', { horizon: 25 }],
    ['featureCount', { featureCount: 7 }],
    ['featureCount', { level: true }],
    ['own', { own: new Float64Array(3) }],
    ['scale[1]', { scale: bad(model.scale, 1, 0) }],
    ['latticeStep[0]', { latticeStep: bad(model.latticeStep, 0, -1) }],
    ['clipHigh[0]', { clipHigh: bad(model.clipHigh, 0, -100) }],
    ['radius[3]', { radius: bad(model.radius, 3, -0.1) }],
    ['coverage', { coverage: 1 }],
    ['boundsRate', { boundsRate: 2 }],
    ['boundsLongRate', { boundsLongRate: Number.NaN }],
    ['crossingMap', { crossingMap: new Float64Array(3) }],
    ['crossingMap', { crossingMap: Float64Array.from({ length: 15 }, (_, k) => (k === 4 ? 0 : k / 14)) }],
    ['crossingFresh', { crossingFresh: 0 }],
    ['rejectSd', { rejectSd: Number.NaN }],
    ['horizon', { horizon: 0 }],
    ['seasonalPeriod', { seasonalPeriod: 1.5 }],
    ['signalCount', { signalCount: 3 }],
  ];
  test.each(cases)('%s', (field, change) => {
    const [code, named] = codeAndField(() => checkModel({ ...model, ...change }));
    expect(code).toBe('model');
    if (field !== 'signalCount') expect(named).toBe(field);
  });

  test('and takes what is right', () => {
    expect(() => checkModel(model)).not.toThrow();
  });
});
