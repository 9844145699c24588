/** Moments from factors against the same sums over the readings. */
import { describe, expect, it } from 'vitest';
import type { Factors } from '../../../trainer/factors/factors.ts';
import { momentsFromFactors } from '../../../trainer/factors/moments.ts';
import { type Bank, designBank } from '../../../trainer/identify/bank.ts';
import { addInto } from '../../../trainer/identify/moment-sets.ts';
import { eachMoments, type Moments } from '../../../trainer/identify/moments.ts';
import {
  direct,
  expectAlike,
  gathered,
  horizon,
  plantValues,
  scalings,
  shape,
  signalCount,
  standardised,
  wholeBank,
} from '../../support/factors-history.ts';

/** Transforms keep 15 digits of the largest lag; a slow pole's products lose as many as its memory squared has. */
const TOLERANCE = 1e-11;
const ticks = 3000;
const values = plantValues(ticks);
const seen: readonly [number, number] = [0, ticks - 1];
const round = { ticks: 12, weight: Float64Array.of(1, 0.5) };

function momentsOf(factors: Factors, bank: Bank, taken: typeof round | null = null): Moments {
  return momentsFromFactors(factors, { bank, horizon, scalings, signalCount, round: taken });
}

describe('momentsFromFactors', () => {
  const factors = gathered(values).end();

  it.each([
    ['means and resonators', { ...wholeBank, lags: [], hasLevel: false }],
    ['the level beside them', { ...wholeBank, lags: [] }],
    ['lags beside them', { ...wholeBank, hasLevel: false }],
    ['level and lags', wholeBank],
    ['lags alone', { decays: [], resonators: [], lags: [1, 3, 70] }],
    ['no period', designBank({ periodTicks: 0, otherPeriods: [], horizon, learnTicks: 3000, channelCount: 3 })],
    ['two periods', designBank({ periodTicks: 24, otherPeriods: [7.5], horizon, learnTicks: 3000, channelCount: 3 })],
  ])('equals sums over the readings: %s', (_, bank) => {
    expectAlike(momentsOf(factors, bank), direct(values, [seen], bank), TOLERANCE);
  });

  it('takes a round away as from the readings', () => {
    expectAlike(momentsOf(factors, wholeBank, round), direct(values, [seen], wholeBank, round), TOLERANCE);
  });

  it('serves shorter and longer horizons alike', () => {
    const wish = { bank: wholeBank, horizon: 12, scalings, signalCount, round: null };
    const far = momentsFromFactors(factors, wish);
    // The six last origins are missing, whose share of the sums is about as large.
    const near = momentsOf(factors, wholeBank);
    expect(near.origins - far.origins).toBe(6);
    expect(Math.abs(far.energy[0]! / near.energy[0]! - 1)).toBeLessThan(0.01);
  });

  it.each([
    ['a horizon', { horizon: 13 }, /horizons up to 12 ticks, asked for 13/],
    ['a round', { round: { ticks: 25, weight: Float64Array.of(1, 1) } }, /rounds up to 24 ticks, asked for 25/],
    ['a lag', { bank: { ...wholeBank, lags: [1, 100] } }, /ring lags up to 71 ticks, asked for 100/],
  ])('refuses %s beyond its reach', (_, change, message) => {
    const wish = { bank: wholeBank, horizon, scalings, signalCount, round: null };
    expect(() => momentsFromFactors(factors, { ...wish, ...change })).toThrow(message);
  });
});

describe('weights by age', () => {
  it('equal sums over the readings with weights', () => {
    const halfLifeTicks = 400;
    const short = values.map((row) => row.slice(0, 700));
    const factors = gathered(short, 90, { ...shape, halfLifeTicks }).end();
    // The last reading waits for its next; its tick is the one that weighs one in the sums.
    expectAlike(momentsOf(factors, wholeBank), weighted(short, wholeBank, 698, halfLifeTicks), 1e-10);
  });
});

describe('a half-life shorter than a memory', () => {
  it('is refused', () => {
    const factors = gathered(values, ticks, { ...shape, halfLifeTicks: 50 }).end();
    expect(() => momentsOf(factors, wholeBank)).toThrow(/half-life of 50 ticks, shorter than the \d+ ticks/);
  });
});

describe('a reach shorter than a memory needs', () => {
  it('is refused', () => {
    const factors = gathered(values, ticks, { ...shape, reach: 500 }).end();
    expect(() => momentsOf(factors, wholeBank)).toThrow(/reach 500 ticks, too few for the 96 ticks/);
  });
});

/** Origins one by one, each weighted by its age at tick `newest`. */
function weighted(values: readonly Float64Array[], bank: Bank, newest: number, halfLife: number): Moments {
  const z = standardised(values, [0, newest + 1], null);
  const blocks = Array.from({ length: newest - horizon }, (_, k) => ({ fromIndex: k + 1, toIndex: k + 2 }));
  let sum: Moments | null = null;
  let t = 1;
  for (const one of eachMoments({ values: z, signalCount, bank, horizon }, blocks)) {
    const weight = 2 ** (-(newest - t++) / halfLife);
    const scaled = (row: Float64Array): Float64Array => row.map((value) => value * weight);
    const part = {
      origins: weight,
      features: scaled(one.features),
      future: scaled(one.future),
      energy: scaled(one.energy),
      featureSums: scaled(one.featureSums),
      futureSums: scaled(one.futureSums),
    };
    sum = addInto(sum, part);
  }
  return sum!;
}
