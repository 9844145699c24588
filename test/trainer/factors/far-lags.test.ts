/** Lags far enough out that they are worked out from thinned changes. */
import { describe, expect, it } from 'vitest';
import type { Factors, FactorsShape } from '../../../trainer/factors/factors.ts';
import { encodeFactors } from '../../../trainer/factors/file.ts';
import { FactorsGatherer } from '../../../trainer/factors/gather.ts';
import { gridOf, momentsFromFactors } from '../../../trainer/factors/moments.ts';
import { gatherMoments, type Moments } from '../../../trainer/identify/moments.ts';
import { expectAlike, scalings, shape } from '../../support/factors-history.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const horizon = 4;
const far: FactorsShape = {
  ...shape,
  names: ['flow'],
  units: ['m3/h'],
  signalCount: 1,
  reach: 138_240,
  longestHorizon: 8,
  longestRound: 0,
};
const day = 1440;
/** The slowest mean and the fastest and slowest resonators of a bank for minutes. */
const bank = {
  decays: [1.5, 6144].map((memory) => Math.exp(-1 / memory)),
  resonators: [
    [day, 6],
    [7 * day, 1],
    [7 * day, 6],
  ].map(([memory, m]) => {
    const radius = Math.exp(-1 / memory!);
    const angle = (2 * Math.PI * m!) / day;
    return [radius * Math.cos(angle), radius * Math.sin(angle)] as const;
  }),
  lags: [1, 5],
  hasLevel: true,
};
const ticks = 100_000;
const longest = 270_000;
const values = record(longest);

/** A wanderer about a daily wave and its sixth harmonic. */
function record(length: number): Float64Array {
  const next = recurrence(23);
  let level = 0;
  return Float64Array.from({ length }, (_, t) => {
    level = 0.97 * level + next() / 2 ** 31 - 1;
    const turn = (2 * Math.PI * t) / day;
    return 40 + level + 2 * Math.sin(turn) + Math.sin(6 * turn);
  });
}

function gatherIn(chunk: number, halfLifeTicks: number | null = null): FactorsGatherer {
  const gatherer = new FactorsGatherer({ ...far, halfLifeTicks });
  for (let t = 0; t < ticks; t += chunk) give(gatherer, t, Math.min(ticks, t + chunk));
  return gatherer;
}

function give(gatherer: FactorsGatherer, from: number, to: number): void {
  const { tickMs, names } = far;
  const digest = new Uint8Array(32);
  gatherer.take({
    tickMs,
    firstTick: from,
    ticks: to - from,
    names,
    signalCount: 1,
    values: [values.subarray(from, to)],
    digest,
  });
}

function momentsOf(factors: Factors): Moments {
  return momentsFromFactors(factors, { bank, horizon, scalings: [scalings[0]!], signalCount: 1, round: null });
}

/** Σ 2^(-age / half-life) D(t) D(t - lag) r^lag cos(angle · lag) over all lags, the inner sum carried from tick to tick. */
function weightedWave(halfLifeTicks: number, radius: number, angle: number): number {
  const newest = ticks - 2;
  const [re, im] = [radius * Math.cos(angle), radius * Math.sin(angle)];
  let [x, y, sum] = [0, 0, 0];
  for (let t = 1; t <= newest; t++) {
    const change = values[t]! - values[t - 1]!;
    [x, y] = [re * x - im * y + change, im * x + re * y];
    sum += 2 ** (-(newest - t) / halfLifeTicks) * change * x;
  }
  return sum;
}

describe('far lags', () => {
  const whole = momentsOf(gatherIn(ticks).end());

  it('leave moments equal to sums over the readings', () => {
    const { mean, scale } = scalings[0]!;
    const z = values.subarray(0, ticks - 1).map((value) => (value - mean) / scale);
    const block = { fromIndex: 1, toIndex: ticks - 1 - horizon };
    const [direct] = gatherMoments({ values: [z], signalCount: 1, bank, horizon }, [block]);
    // The kernel passes all but some 5e-7, of which memories have let go most by then.
    expectAlike(whole, direct!, 1e-7);
  });

  it('do not depend on chunks', () => {
    expectAlike(momentsOf(gatherIn(16_384).end()), whole, 1e-11);
  });

  it('may be looked at where the room for thinned changes is nearly used up', () => {
    // A transform of 32,768 thinned ticks, which so many ticks all but fill.
    const [looked, plain] = [true, false].map((isLookedAt) => {
      const gatherer = new FactorsGatherer(far);
      give(gatherer, 0, 262_032);
      if (isLookedAt) gatherer.end();
      give(gatherer, 262_032, longest);
      return gatherer.end().sums.lagged;
    });
    const scale = Math.abs(plain![0]!);
    const off = looked!.map((sum, place) => Math.abs(sum - plain![place]!) / scale);
    expect(Math.max(...off)).toBeLessThan(1e-11);
  });

  it.each([6144, 40_000])('weigh ticks by their age: sums over the readings, half-life %i', (halfLifeTicks) => {
    const factors = gatherIn(16_384, halfLifeTicks).end();
    const { lags } = gridOf(factors);
    // Waves that do not fade, so that far lags count as much as near ones, and one that does.
    for (const [radius, angle] of [
      [1, 0],
      [1, (12 * Math.PI) / day],
      [Math.exp(-1 / 10_080), (2 * Math.PI) / day],
    ] as const) {
      let sum = 0;
      lags.forEach((lag, place) => {
        sum += factors.sums.lagged[place]! * radius ** lag * Math.cos(angle * lag);
      });
      const slow = weightedWave(halfLifeTicks, radius, angle);
      // As much as the kernel lets through; weights one tick off show as more than that.
      expect(Math.abs(sum / slow - 1), `${radius} ${angle}`).toBeLessThan(1e-6);
    }
  });

  it.each([null, 40_000])('go on from a snapshot, half-life %s', (halfLifeTicks) => {
    const first = new FactorsGatherer({ ...far, halfLifeTicks });
    give(first, 0, 61_111);
    const again = FactorsGatherer.restore({ ...far, halfLifeTicks }, first.snapshot());
    for (const gatherer of [first, again]) give(gatherer, 61_111, ticks);
    const [a, b] = [first.end(), again.end()];
    expect(Buffer.compare(encodeFactors(a), encodeFactors(b))).toBe(0);
    expectAlike(momentsOf(a), momentsOf(gatherIn(ticks, halfLifeTicks).end()), 1e-10);
  });
});
