/** Moments by the bank's recursion against the slow, obvious route: every feature computed from its definition, and summed. */
import { describe, expect, it } from 'vitest';
import { type Bank, designBank, featureCount } from '../../../trainer/identify/bank.ts';
import { aboutMeans, addMoments, pickMoments } from '../../../trainer/identify/moment-sets.ts';
import { type Block, gatherMoments, type Moments } from '../../../trainer/identify/moments.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const horizon = 5;
const signalCount = 2;
const next = recurrence(11);
const values = Array.from({ length: 3 }, (_, c) => {
  let level = 0;
  return Float64Array.from({ length: 160 }, (_, t) => {
    level = 0.9 * level + next() / 2 ** 31 - 1;
    return level + Math.sin((2 * Math.PI * t) / 12 + c);
  });
});
const recursive: Bank = {
  ...designBank({ periodTicks: 12, otherPeriods: [], horizon, learnTicks: 400, channelCount: 3 }),
  lags: [],
  hasLevel: false,
};

/** Features by convolution: e(t) - y(t) and s(t) - g y(t), started at the steady state of the first reading. */
function direct(bank: Bank, block: Block): Moments {
  const F = featureCount(bank);
  const p = values.length * F;
  const width = signalCount * horizon;
  const features = new Float64Array(p * p);
  const future = new Float64Array(p * width);
  const energy = new Float64Array(width);
  const featureSums = new Float64Array(p);
  const futureSums = new Float64Array(width);
  for (let t = block.fromIndex; t < block.toIndex; t++) {
    const phi = new Float64Array(p);
    values.forEach((y, c) => {
      let at = c * F;
      for (const a of bank.decays) {
        let e = a ** t * y[0]!;
        for (let k = 0; k < t; k++) e += (1 - a) * a ** k * y[t - k]!;
        phi[at++] = e - y[t]!;
      }
      for (const [re, im] of bank.resonators) {
        const radius = Math.hypot(re, im);
        const angle = Math.atan2(im, re);
        const away = (1 - re) ** 2 + im ** 2;
        const g = [((1 - radius) * (1 - re)) / away, ((1 - radius) * im) / away] as const;
        let sr = radius ** t * (Math.cos(angle * t) * g[0] - Math.sin(angle * t) * g[1]) * y[0]!;
        let si = radius ** t * (Math.sin(angle * t) * g[0] + Math.cos(angle * t) * g[1]) * y[0]!;
        for (let k = 0; k < t; k++) {
          sr += (1 - radius) * radius ** k * Math.cos(angle * k) * y[t - k]!;
          si += (1 - radius) * radius ** k * Math.sin(angle * k) * y[t - k]!;
        }
        phi[at++] = sr - g[0] * y[t]!;
        phi[at++] = si - g[1] * y[t]!;
      }
      if (bank.hasLevel === true) phi[at++] = -y[t]!;
      for (const lag of bank.lags) phi[at++] = y[Math.max(0, t - lag)]! - y[t]!;
    });
    for (let i = 0; i < signalCount; i++) {
      for (let h = 1; h <= horizon; h++) {
        const change = values[i]![t + h]! - values[i]![t]!;
        energy[i * horizon + h - 1]! += change * change;
        futureSums[i * horizon + h - 1]! += change;
        for (let f = 0; f < p; f++) future[f * width + i * horizon + h - 1]! += phi[f]! * change;
      }
    }
    for (let f = 0; f < p; f++) featureSums[f]! += phi[f]!;
    for (let f = 0; f < p; f++) for (let g = 0; g < p; g++) features[f * p + g]! += phi[f]! * phi[g]!;
  }
  return { origins: block.toIndex - block.fromIndex, features, future, energy, featureSums, futureSums };
}

/** Sums over a hundred origins of numbers up to ten: a thousandfold of 1e-16 times their size. */
function expectAlike(got: Moments, expected: Moments): void {
  expect(got.origins).toBe(expected.origins);
  for (const key of ['features', 'future', 'energy', 'featureSums', 'futureSums'] as const) {
    const largest = expected[key].reduce((most, value) => Math.max(most, Math.abs(value)), 0);
    let worst = 0;
    for (let k = 0; k < expected[key].length; k++) worst = Math.max(worst, Math.abs(got[key][k]! - expected[key][k]!));
    expect(worst / largest, key).toBeLessThan(1e-12);
  }
}

describe.each([
  ['means and resonators', recursive],
  ['lags beside them, longer than what lies before a block', { ...recursive, lags: [1, 2, 5, 13] }],
  ['the level beside them', { ...recursive, hasLevel: true }],
  ['the level between resonators and lags', { ...recursive, hasLevel: true, lags: [1, 4] }],
  ['lags alone', { decays: [], resonators: [], lags: [1, 3] }],
])('gatherMoments, %s', (_, bank) => {
  const blocks = [
    { fromIndex: 3, toIndex: 60 },
    { fromIndex: 60, toIndex: 61 },
    { fromIndex: 70, toIndex: 155 },
  ];
  const gathered = gatherMoments({ values, signalCount, bank, horizon }, blocks);

  it('equals direct products on every block, edges included', () => {
    blocks.forEach((block, k) => {
      expectAlike(gathered[k]!, direct(bank, block));
    });
  });

  it('is additive over adjoining blocks', () => {
    const [whole] = gatherMoments({ values, signalCount, bank, horizon }, [{ fromIndex: 3, toIndex: 61 }]);
    expectAlike(addMoments(gathered.slice(0, 2)), whole!);
  });

  it('picks features and steps where they stand', () => {
    const layout = { channelCount: 3, signalCount, featureCount: featureCount(bank), steps: horizon };
    const picked = pickMoments(gathered[0]!, layout, [0, 1], [2, 5]);
    const p = 3 * layout.featureCount;
    // Row of feature 1 of channel 2 is 5; column of step 5 of signal 1 is 3.
    const feature = 2 * layout.featureCount + 1;
    expect(picked.features[5 * 6 + 0]).toBe(gathered[0]!.features[feature * p + 0]);
    expect(picked.future[5 * 4 + 3]).toBe(gathered[0]!.future[feature * 2 * horizon + horizon + 4]);
    expect(picked.energy[3]).toBe(gathered[0]!.energy[horizon + 4]);
  });

  it('takes sums about the means as a fit with a constant term would', () => {
    const [block] = gathered;
    const about = aboutMeans(block!);
    const p = block!.featureSums.length;
    const mean = block!.featureSums.map((sum) => sum / block!.origins);
    // Σ (φ - m)(φ - m)' = Σ φφ' - n m m'
    expect(about.features[1]).toBeCloseTo(block!.features[1]! - block!.origins * mean[0]! * mean[1]!, 9);
    expect(about.features[p + 1]).toBeLessThan(block!.features[p + 1]!);
    expect(about.future[2]).toBeCloseTo(block!.future[2]! - mean[0]! * block!.futureSums[2]!, 9);
    expect(about.energy).toBe(block!.energy);
  });

  it('refuses a block whose future leaves the readings', () => {
    const reach = (fromIndex: number, toIndex: number) => () =>
      gatherMoments({ values, signalCount, bank, horizon }, [{ fromIndex, toIndex }]);
    expect(reach(3, 156)).toThrow(/leaves the 160 ticks/);
    expect(reach(0, 10)).toThrow(/leaves the 160 ticks/);
  });
});
