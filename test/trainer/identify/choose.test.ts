/** What rolling origin settles on: the last value where nothing surely beats it, a map where something does. */
import { describe, expect, it } from 'vitest';
import { designBank, featureCount, settlingTicks } from '../../../trainer/identify/bank.ts';
import { fillHistory } from '../../../trainer/identify/fill.ts';
import { type LearnOutput, learn } from '../../../trainer/identify/learn.ts';
import { findScalings } from '../../../trainer/identify/scaling.ts';
import { bankSizes } from '../../../trainer/identify/sub-banks.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seriesOf } from '../../support/history.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const H = 12;
const ends = { learnTicks: 1500, calibrateEnd: 2000 };

function learned(channels: readonly Float64Array[]): LearnOutput {
  const series = seriesOf(
    channels.map((_, c) => `y${c}`),
    channels,
  );
  const scalings = findScalings(
    series,
    ends.learnTicks,
    ends.calibrateEnd,
    channels.map(() => 0.001),
  );
  const filled = fillHistory(series, scalings, 0, H, ends);
  return learn({
    filled,
    signalCount: channels.length,
    horizon: H,
    periodTicks: 0,
    otherPeriods: [],
    learnTicks: ends.learnTicks,
    calibrateTicks: ends.calibrateEnd - ends.learnTicks,
    round: null,
    earlier: null,
  });
}

/** Mean reverting for decay < 1, a random walk for 1. */
function path(decay: number, seed: number): Float64Array {
  const next = recurrence(seed);
  const normal = gaussians(() => next() / 2 ** 32);
  let level = 0;
  return Float64Array.from({ length: 2000 }, () => {
    level = decay * level + normal();
    return level;
  });
}

describe('choose', () => {
  it('keeps the last value of random walks but where chance is one in ten', () => {
    const seeds = [1, 2, 3, 4, 5, 6, 7, 8, 9, 10];
    const choices = seeds.map((seed) => learned([path(1, seed)]));
    const taken = choices.filter(({ choice }) => choice.ownPenalty[0] !== null).length;
    // Binomial, ten trials of a tenth: more than two in 7 % of cases.
    expect(taken).toBeLessThanOrEqual(2);
    const still = choices.find(({ choice }) => choice.ownPenalty[0] === null);
    expect(still?.learned.map.every((value) => value === 0)).toBe(true);
  });

  it('takes lags in where the past comes back all at once, and not where means say as much', () => {
    const echo = path(0, 3);
    for (let t = 5; t < echo.length; t++) echo[t] = echo[t]! + 0.8 * echo[t - 5]!;
    const { choice, learned: got } = learned([echo]);
    expect(choice.bank.lags).toContain(5);
    expect(got.layout.featureCount).toBe(featureCount(choice.bank));
    expect(learned([path(0.9, 7)]).choice.bank.lags).toEqual([]);
  });

  it('learns a map where there is something to learn', () => {
    const { choice } = learned([path(0.9, 7)]);
    expect(choice.ownPenalty[0]).not.toBeNull();
  });
});

describe('designBank', () => {
  const wish = { periodTicks: 24, otherPeriods: [], horizon: H, learnTicks: 4000, channelCount: 3 };

  it('holds means, resonators, recent lags and those around a short period', () => {
    const bank = designBank(wish);
    expect(bank.decays.length).toBe(8);
    expect(bank.resonators.length).toBe(18);
    expect(bank.lags).toEqual([1, 2, 3, 5, 8, 13, 21, 23, 24, 25, 34, 55]);
    expect(designBank({ ...wish, periodTicks: 1440, learnTicks: 20_000 }).lags).toEqual([
      1, 2, 3, 5, 8, 13, 21, 34, 55,
    ]);
    expect(designBank({ ...wish, periodTicks: 0, learnTicks: 90 }).lags).toEqual([1, 2, 3, 5, 8]);
    expect(settlingTicks({ decays: [], resonators: [], lags: bank.lags })).toBe(55);
  });

  it('adds resonators of further periods after those of the period, on a rung of their own', () => {
    const plain = designBank(wish);
    const more = designBank({ ...wish, otherPeriods: [17] });
    expect(more.resonators.slice(0, 18)).toEqual(plain.resonators);
    expect(more.resonators.length).toBe(24);
    expect(more.rungs).toEqual([2, 6, 18, 24]);
    const [re, im] = more.resonators[18]!;
    expect((2 * Math.PI) / Math.atan2(im, re)).toBeCloseTo(17, 9);
    expect(bankSizes(more).map(({ resonators }) => resonators)).toEqual([0, 0, 2, 6, 18, 24]);
  });

  it.each([16, 40, 200])('gives each of %i channels few enough features', (channelCount) => {
    const bank = designBank({ ...wish, channelCount });
    expect(featureCount(bank)).toBeLessThanOrEqual(Math.max(6, 768 / channelCount));
    expect(bank.decays.length).toBeGreaterThanOrEqual(2);
    expect(bank.decays[0]).toBeCloseTo(Math.exp(-1 / 1.5), 12);
  });
});
