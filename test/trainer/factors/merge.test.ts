/** Factors joined and made lighter. */
import { describe, expect, it } from 'vitest';
import type { Factors } from '../../../trainer/factors/factors.ts';
import { FactorsGatherer } from '../../../trainer/factors/gather.ts';
import { forget, joinFactors, mergeFactors } from '../../../trainer/factors/merge.ts';
import { momentsFromFactors } from '../../../trainer/factors/moments.ts';
import type { Moments } from '../../../trainer/identify/moments.ts';
import {
  direct,
  expectAlike,
  horizon,
  plantValues,
  scalings,
  seriesOf,
  shape,
  signalCount,
  wholeBank,
} from '../../support/factors-history.ts';

const values = plantValues(2000);
const bank = { ...wholeBank, resonators: wholeBank.resonators.slice(0, 4) };

function momentsOf(factors: Factors): Moments {
  return momentsFromFactors(factors, { bank, horizon, scalings, signalCount, round: null });
}

function span(from: number, to: number, halfLifeTicks: number | null = null): Factors {
  const gatherer = new FactorsGatherer({ ...shape, halfLifeTicks });
  gatherer.take(seriesOf(values, from, to));
  return gatherer.end();
}

describe('mergeFactors', () => {
  it('equals learning from both', () => {
    const merged = mergeFactors(span(0, 900), span(900, 2000));
    const runs: [number, number][] = [
      [0, 900],
      [900, 1999],
    ];
    expectAlike(momentsOf(merged), direct(values, runs, bank), 1e-11);
    expect([merged.fromTick, merged.toTick, merged.ticks]).toEqual([0, 2000, 2000]);
  });

  it.each([null, 500])('equals gathering both across a gap, half-life %s', (halfLifeTicks) => {
    const gatherer = new FactorsGatherer({ ...shape, halfLifeTicks });
    gatherer.take(seriesOf(values, 0, 900));
    gatherer.take(seriesOf(values, 950, 2000));
    const merged = mergeFactors(span(0, 900, halfLifeTicks), span(950, 2000, halfLifeTicks));
    expectAlike(momentsOf(merged), momentsOf(gatherer.end()), 1e-10);
  });

  it('goes on like either', () => {
    const merged = mergeFactors(span(0, 900), span(950, 1500));
    const onward = new FactorsGatherer(merged, merged);
    onward.take(seriesOf(values, 1500, 2000));
    const runs: [number, number][] = [
      [0, 900],
      [950, 1999],
    ];
    expectAlike(momentsOf(onward.end()), direct(values, runs, bank), 1e-11);
  });

  it('does not mind how three are joined', () => {
    const [a, b, c] = [span(0, 600), span(600, 1300), span(1300, 2000)];
    const left = mergeFactors(mergeFactors(a, b), c);
    expectAlike(momentsOf(mergeFactors(a, mergeFactors(b, c))), momentsOf(left), 1e-11);
  });

  it('refuses spans that overlap, and factors of another kind', () => {
    expect(() => mergeFactors(span(0, 900), span(899, 2000))).toThrow(/would count twice/);
    expect(() => mergeFactors(span(0, 900), span(900, 2000, 500))).toThrow(
      /halfLifeTicks null and 500 cannot be joined/,
    );
  });
});

describe('forget', () => {
  it('makes all of it weigh half after a half-life', () => {
    const factors = span(0, 2000, 500);
    const later = momentsOf(forget(factors, 500));
    const now = momentsOf(factors);
    expect(later.origins / now.origins).toBeCloseTo(0.5, 12);
    now.future.forEach((value, k) => {
      expect(later.future[k]! / value).toBeCloseTo(0.5, 12);
    });
  });

  it('leaves factors without a half-life as they are', () => {
    const factors = span(0, 2000);
    expect(forget(factors, 500)).toBe(factors);
  });
});

it('joins spans in whatever order they are given', () => {
  const part = (from: number, to: number): Factors => {
    const gatherer = new FactorsGatherer(shape);
    gatherer.take(seriesOf(values, from, to));
    return gatherer.end();
  };
  const [a, b, c] = [part(0, 600), part(600, 1300), part(1300, 2000)];
  expect(joinFactors([c, a, b])).toEqual(mergeFactors(mergeFactors(a, b), c));
});
