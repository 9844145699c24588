/** Many runs, of whose ends only the last are known one by one. */
import { EigenvalueDecomposition, Matrix } from 'ml-matrix';
import { describe, expect, it } from 'vitest';
import { decodeFactors, encodeFactors } from '../../../trainer/factors/file.ts';
import { FactorsGatherer } from '../../../trainer/factors/gather.ts';
import { mergeFactors } from '../../../trainer/factors/merge.ts';
import { momentsFromFactors } from '../../../trainer/factors/moments.ts';
import {
  direct,
  expectAlike,
  gathered,
  horizon,
  plantValues,
  scalings,
  seriesOf,
  shape,
  signalCount,
  wholeBank,
} from '../../support/factors-history.ts';

const bank = { ...wholeBank, resonators: wholeBank.resonators.slice(0, 4) };
const wish = { bank, horizon, scalings, signalCount, round: null };
const ticks = 4000;
const values = plantValues(ticks);
const gappy = values.map((row) => row.slice());
const runs: [number, number][] = [];
for (let t = 0; t < ticks; t += 40) {
  if (t + 40 < ticks) gappy[0]!.fill(Number.NaN, t + 32, t + 40);
  runs.push([t, t + 40 < ticks ? t + 32 : ticks - 1]);
}

describe('a history with a hundred long gaps', () => {
  const factors = gathered(gappy, 700).end();
  const moments = momentsFromFactors(factors, wish);

  it('is more than is kept one by one', () => {
    expect(factors.ends.length).toBeLessThan(runs.length);
    expect(factors.rungOut).not.toBeNull();
  });

  it('has no mixture of features with a negative sum of squares', () => {
    const p = moments.featureSums.length;
    const width = moments.energy.length;
    // Features and futures together, each brought to one.
    const size = (k: number): number =>
      Math.sqrt(k < p ? moments.features[k * p + k]! : moments.energy[(k - p) * horizon + horizon - 1]!);
    const product = (a: number, b: number): number => {
      if (a < p && b < p) return moments.features[a * p + b]!;
      if (a >= p && b >= p) return a === b ? moments.energy[(a - p) * horizon + horizon - 1]! : 0;
      const [f, i] = a < p ? [a, b - p] : [b, a - p];
      return moments.future[f * width + i * horizon + horizon - 1]!;
    };
    // One signal's furthest step at a time, since products of two steps are not among the moments.
    for (let i = 0; i < signalCount; i++) {
      const chosen = [...Array.from({ length: p }, (_, f) => f), p + i];
      const rows = chosen.map((a) => chosen.map((b) => product(a, b) / (size(a) * size(b))));
      const least = Math.min(
        ...new EigenvalueDecomposition(new Matrix(rows), { assumeSymmetric: true }).realEigenvalues,
      );
      expect(least).toBeGreaterThan(-1e-9);
    }
  });

  it('keeps what does not ring exactly', () => {
    const lagless = { ...bank, lags: [], decays: [], resonators: [] };
    const level = momentsFromFactors(factors, { ...wish, bank: lagless });
    // Levels are summed up to the last tick there, and to a horizon before it here.
    const expected = direct(values, runs, lagless);
    expect(level.origins - expected.origins).toBe((runs.length - factors.ends.length) * horizon);
  });

  it('can be written, read and joined', () => {
    const bytes = encodeFactors(factors);
    expect(Buffer.compare(encodeFactors(decodeFactors(bytes, 'a.swf')), bytes)).toBe(0);
    const halves = [seriesOf(gappy, 0, 1992), seriesOf(gappy, 2000, ticks)].map((series) => {
      const gatherer = new FactorsGatherer(shape);
      gatherer.take(series);
      return gatherer.end();
    });
    const joined = mergeFactors(halves[0]!, halves[1]!);
    expect(joined.ends.length).toBe(factors.ends.length);
    expectAlike(momentsFromFactors(joined, wish), moments, 1e-10);
  });

  it('does without rounds', () => {
    const round = { ticks: 12, weight: Float64Array.of(1, 1) };
    expect(() => momentsFromFactors(factors, { ...wish, round })).toThrow(/rounds up to 0 ticks/);
  });
});
