/** Signals that stay away: the others teach on, and no mixture of features gets a negative sum of squares. */
import { EigenvalueDecomposition, Matrix } from 'ml-matrix';
import { describe, expect, it } from 'vitest';
import { isNonNegative, scaleToAll } from '../../../trainer/factors/availability.ts';
import { momentsFromFactors } from '../../../trainer/factors/moments.ts';
import { featureCount } from '../../../trainer/identify/bank.ts';
import type { Moments } from '../../../trainer/identify/moments.ts';
import {
  direct,
  gathered,
  horizon,
  plantValues,
  scalings,
  shape,
  signalCount,
  wholeBank,
} from '../../support/factors-history.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const bank = { ...wholeBank, decays: wholeBank.decays.slice(0, 4), resonators: wholeBank.resonators.slice(0, 4) };
const features = featureCount(bank);

/** The (c, d) block of the features' products. */
function blockOf(moments: Moments, c: number, d: number): number[] {
  const p = 3 * features;
  return Array.from({ length: features * features }, (_, k) => {
    const [f, g] = [Math.floor(k / features), k % features];
    return moments.features[(c * features + f) * p + d * features + g]!;
  });
}

function expectNear(got: readonly number[], expected: readonly number[]): void {
  const largest = Math.max(...expected.map(Math.abs));
  got.forEach((value, k) => {
    expect(Math.abs(value - expected[k]!) / largest).toBeLessThan(1e-10);
  });
}

/** Smallest eigenvalue of the features' products, each feature brought to one. */
function least(moments: Moments): number {
  const p = moments.featureSums.length;
  const sizes = Array.from({ length: p }, (_, f) => Math.sqrt(moments.features[f * p + f]!));
  const rows = sizes.map((a, f) => sizes.map((b, g) => moments.features[f * p + g]! / (a * b)));
  return Math.min(...new EigenvalueDecomposition(new Matrix(rows), { assumeSymmetric: true }).realEigenvalues);
}

describe('a signal that stays away', () => {
  const values = plantValues(2000);
  const gone = values.map((row) => row.slice());
  gone[1]!.fill(Number.NaN, 300, 1700);
  const factors = gathered(gone).end();
  const moments = momentsFromFactors(factors, { bank, horizon, scalings, signalCount, round: null });
  // Eight long gaps after its last reading the signal counts as absent, and the others begin anew.
  const apart: [number, number][] = [
    [0, 300],
    [348, 1700],
    [1700, 1999],
  ];

  it('leaves what the others teach as it is', () => {
    const expected = direct(values, apart, bank);
    expect(moments.origins).toBe(expected.origins);
    for (const [c, d] of [
      [0, 0],
      [0, 2],
      [2, 2],
    ] as const) {
      expectNear(blockOf(moments, c, d), blockOf(expected, c, d));
    }
    expectNear([...moments.energy.slice(0, horizon)], [...expected.energy.slice(0, horizon)]);
  });

  it('teaches by its own time, scaled to all', () => {
    const own = direct(values, [apart[0]!, apart[2]!], bank);
    const share = moments.origins / own.origins;
    expectNear(
      blockOf(moments, 1, 1),
      blockOf(own, 1, 1).map((value) => value * share),
    );
    expectNear(
      [...moments.energy.slice(horizon)],
      [...own.energy.slice(horizon)].map((value) => value * share),
    );
  });

  it('keeps sums of squares from being negative', () => {
    expect(least(moments)).toBeGreaterThan(-1e-9);
  });
});

describe('masks made to contradict each other', () => {
  it('give no negative sums of squares', () => {
    // Signals move together in one stretch and against each other in the next, each pair seen in another.
    const next = recurrence(5);
    let level = 0;
    const values = shape.names.map(() => new Float64Array(3000));
    const signs = [
      [1, 1, 1],
      [1, -1, 1],
      [1, 1, -1],
    ];
    for (let t = 0; t < 3000; t++) {
      level = 0.95 * level + next() / 2 ** 31 - 1;
      for (let c = 0; c < 3; c++) values[c]![t] = signs[Math.floor(t / 1000)]![c]! * level + 0.01 * (next() / 2 ** 31);
    }
    for (let part = 0; part < 3; part++) values[(part + 2) % 3]!.fill(Number.NaN, part * 1000 + 1, part * 1000 + 999);
    const three = { ...shape, signalCount: 3 };
    const factors = gathered(values, 500, three).end();
    const wish = { bank: { ...bank, resonators: [] }, horizon, scalings, signalCount: 3, round: null };
    const moments = momentsFromFactors(factors, wish);
    expect(least(moments)).toBeGreaterThan(-1e-9);
    const layout = { channels: 3, signalCount: 3, features: featureCount(wish.bank), horizon };
    expect(isNonNegative(moments, layout)).toBe(true);
  });

  it('would, if pairs were scaled alone', () => {
    // Three features of one channel each: 0 with 1 and 1 with 2 alike, 0 with 2 opposite, each known from a third of the time.
    const features = Float64Array.of(2, 1, -1, 1, 2, 1, -1, 1, 2);
    const moments: Moments = {
      origins: 3,
      features,
      future: new Float64Array(3),
      energy: Float64Array.of(2),
      featureSums: new Float64Array(3),
      futureSums: new Float64Array(1),
    };
    const layout = { channels: 3, signalCount: 1, features: 1, horizon: 1 };
    const paired: Moments = { ...moments, features: Float64Array.of(3, 3, -3, 3, 3, 3, -3, 3, 3) };
    expect(isNonNegative(paired, layout)).toBe(false);
    scaleToAll(moments, Float64Array.of(2, 1, 1, 1, 2, 1, 1, 1, 2), layout);
    expect(isNonNegative(moments, layout)).toBe(true);
    expect(least(moments)).toBeGreaterThan(-1e-9);
    expect(moments.features[0]).toBe(3);
  });
});
