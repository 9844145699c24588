/** Moments from factors against the same sums over the readings. */
import type { Round } from '@stillwell/runtime/filter';
import { describe, expect, it } from 'vitest';
import type { FactorsShape } from '../../../trainer/factors/factors.ts';
import { FactorsGatherer } from '../../../trainer/factors/gather.ts';
import { momentsFromFactors } from '../../../trainer/factors/moments.ts';
import type { Series } from '../../../trainer/history/series.ts';
import { type Bank, designBank } from '../../../trainer/identify/bank.ts';
import { gatherMoments, type Moments } from '../../../trainer/identify/moments.ts';
import type { Scaling } from '../../../trainer/identify/scaling.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const horizon = 6;
const signalCount = 2;
const next = recurrence(11);
const ticks = 3000;
const values = Array.from({ length: 3 }, (_, c) => {
  let level = 0;
  return Float64Array.from({ length: ticks }, (_, t) => {
    level = 0.9 * level + next() / 2 ** 31 - 1;
    return 40 + 10 * c + (1 + c) * (level + Math.sin((2 * Math.PI * t) / 12 + c));
  });
});
const scalings: Scaling[] = values.map((_, c) => ({
  mean: 41 + 10 * c,
  scale: 2 + c,
  clipLow: -1e9,
  clipHigh: 1e9,
  isConstant: false,
}));
const shape: FactorsShape = {
  site: 'mill-3',
  tickMs: 3_600_000,
  names: ['a', 'b', 'c'],
  units: ['1', '1', '1'],
  signalCount,
  schema: '00',
  halfLifeTicks: null,
  reach: 4000,
  longestHorizon: 12,
  longestRound: 24,
  longGapTicks: 6,
};
const bank: Bank = designBank({ periodTicks: 12, otherPeriods: [], horizon, learnTicks: 3000, channelCount: 3 });

function seriesOf(from: number, to: number): Series {
  return {
    tickMs: shape.tickMs,
    firstTick: from,
    ticks: to - from,
    names: shape.names,
    signalCount,
    values: values.map((row) => row.slice(from, to)),
    digest: new Uint8Array(32),
  };
}

function direct(bank: Bank, round: Round | null = null): Moments {
  const z = values.map((row, c) => {
    const own = row.map((value) => (value - scalings[c]!.mean) / scalings[c]!.scale);
    const w = c < signalCount ? (round?.weight[c] ?? 0) : 0;
    return own.map((value, t) => value - w * own[Math.max(0, t - (round?.ticks ?? 0))]!);
  });
  return gatherMoments({ values: z.map((r) => r.slice(0, ticks - 1)), signalCount, bank, horizon }, [
    { fromIndex: 1, toIndex: ticks - 1 - horizon },
  ])[0]!;
}

/** Largest difference over the largest entry, of each part. Lagged sums by Fourier transforms keep 14 digits or so. */
function expectAlike(got: Moments, expected: Moments): void {
  expect(got.origins).toBe(expected.origins);
  for (const key of ['features', 'future', 'energy', 'featureSums', 'futureSums'] as const) {
    const largest = expected[key].reduce((most, value) => Math.max(most, Math.abs(value)), 0);
    let worst = 0;
    for (let k = 0; k < expected[key].length; k++) worst = Math.max(worst, Math.abs(got[key][k]! - expected[key][k]!));
    expect(worst / largest, key).toBeLessThan(1e-11);
  }
}

describe('momentsFromFactors', () => {
  it.each([
    ['means and resonators', { ...bank, lags: [], hasLevel: false }],
    ['with level', { ...bank, lags: [], hasLevel: true }],
    ['with lags', { ...bank, hasLevel: false }],
    ['all', bank],
  ])('%s', (_, one) => {
    const gatherer = new FactorsGatherer(shape);
    gatherer.take(seriesOf(0, ticks));
    const got = momentsFromFactors(gatherer.end(), { bank: one, horizon, scalings, signalCount, round: null });
    expectAlike(got, direct(one));
    const round = { ticks: 12, weight: Float64Array.of(1, 0.5) };
    const left = momentsFromFactors(gatherer.end(), { bank: one, horizon, scalings, signalCount, round });
    expectAlike(left, direct(one, round));
  });
});
