/** A small plant's history for tests of factors, its shape, and slow sums over it. */
import type { Round } from '@stillwell/runtime/filter';
import { expect } from 'vitest';
import type { FactorsShape } from '../../trainer/factors/factors.ts';
import { FactorsGatherer } from '../../trainer/factors/gather.ts';
import type { Series } from '../../trainer/history/series.ts';
import { type Bank, designBank } from '../../trainer/identify/bank.ts';
import { addMoments } from '../../trainer/identify/moment-sets.ts';
import { gatherMoments, type Moments } from '../../trainer/identify/moments.ts';
import type { Scaling } from '../../trainer/identify/scaling.ts';
import { recurrence } from './sample-bundle.ts';

/** Steps asked for. */
export const horizon = 6;
/** Signals; one input beside them. */
export const signalCount = 2;

/** The shape of the history's factors. */
export const shape: FactorsShape = {
  site: 'mill-3',
  tickMs: 3_600_000,
  names: ['flow', 'level', 'gate'],
  units: ['m3/h', 'm', '%'],
  signalCount,
  schema: 'c0ffee',
  halfLifeTicks: null,
  reach: 4000,
  longestHorizon: 12,
  longestRound: 24,
  longGapTicks: 6,
};

/** Scalings that are not the plant's own, so that none is special. */
export const scalings: readonly Scaling[] = shape.names.map((_, c) => ({
  mean: 41 + 10 * c,
  scale: 2 + c,
  clipLow: -1e9,
  clipHigh: 1e9,
  isConstant: false,
}));

/** Every kind of feature: means, resonators, the level, lags. */
export const wholeBank: Bank = designBank({
  periodTicks: 12,
  otherPeriods: [],
  horizon,
  learnTicks: 3000,
  channelCount: 3,
});

/** (nc) of (ticks): three coupled wanderers about a daily wave, far from zero. */
export function plantValues(ticks: number, seed = 11): Float64Array[] {
  const next = recurrence(seed);
  let before = 0;
  return shape.names.map((_, c) => {
    let level = 0;
    return Float64Array.from({ length: ticks }, (_, t) => {
      level = 0.9 * level + next() / 2 ** 31 - 1;
      before = 0.5 * before + level;
      return 40 + 10 * c + (1 + c) * (level + Math.sin((2 * Math.PI * t) / 12 + c)) + 0.1 * before;
    });
  });
}

/** Ticks from..to-1 of values as a series. */
export function seriesOf(values: readonly Float64Array[], from = 0, to = values[0]!.length): Series {
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

/** Factors of all of it, in chunks of some length. */
export function gathered(values: readonly Float64Array[], chunk = values[0]!.length, of = shape): FactorsGatherer {
  const gatherer = new FactorsGatherer(of);
  for (let t = 0; t < values[0]!.length; t += chunk) {
    gatherer.take(seriesOf(values, t, Math.min(values[0]!.length, t + chunk)));
  }
  return gatherer;
}

/** One run's readings standardised, rounds taken away. */
export function standardised(
  values: readonly Float64Array[],
  [from, to]: readonly [number, number],
  round: Round | null,
): Float64Array[] {
  return values.map((row, c) => {
    const own = row.slice(from, to).map((value) => (value - scalings[c]!.mean) / scalings[c]!.scale);
    const w = c < signalCount ? (round?.weight[c] ?? 0) : 0;
    return own.map((value, t) => value - w * own[Math.max(0, t - (round?.ticks ?? 0))]!);
  });
}

/** Moments by sums over the readings of runs from..to-1, each begun at rest. */
export function direct(
  values: readonly Float64Array[],
  runs: readonly (readonly [number, number])[],
  bank: Bank,
  round: Round | null = null,
): Moments {
  const parts = runs.map((run) => {
    const input = { values: standardised(values, run, round), signalCount, bank, horizon };
    return gatherMoments(input, [{ fromIndex: 1, toIndex: run[1] - run[0] - horizon }])[0]!;
  });
  return addMoments(parts);
}

/** Largest difference over the largest entry, of each part of the moments, below a tolerance. */
export function expectAlike(got: Moments, expected: Moments, tolerance: number): void {
  expect(Math.abs(got.origins - expected.origins) / expected.origins).toBeLessThan(tolerance);
  for (const key of ['features', 'future', 'energy', 'featureSums', 'futureSums'] as const) {
    const largest = expected[key].reduce((most, value) => Math.max(most, Math.abs(value)), 0);
    let worst = 0;
    for (let k = 0; k < expected[key].length; k++) {
      const off = Math.abs(got[key][k]! - expected[key][k]!);
      worst = off >= 0 ? Math.max(worst, off) : Number.POSITIVE_INFINITY;
    }
    expect(worst / largest, key).toBeLessThan(tolerance);
  }
}
