/** A map taken apart: own lags of the first steps kept as they are, all else that lags say put onto the rest by regression. */
import { describe, expect, it } from 'vitest';
import { denseTarget } from '../../../trainer/dense/target.ts';
import type { Learned } from '../../../trainer/quantise/quantise.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const next = recurrence(41);
const uniform = (): number => next() / 2 ** 31 - 1;
const bank = { decays: [0.5, 0.9], resonators: [], lags: [1, 4], hasLevel: true };
const [nc, ny, F, steps] = [2, 1, 5, 9];
const p = nc * F;
const mix = Float64Array.from({ length: p * p }, uniform);
const covariance = Float64Array.from({ length: p * p }, (_, at) => {
  const [a, b] = [Math.floor(at / p), at % p];
  let sum = a === b ? 0.5 : 0;
  for (let k = 0; k < p; k++) sum += mix[a * p + k]! * mix[b * p + k]!;
  return sum;
});
const map = Float64Array.from({ length: p * ny * steps }, uniform);
const learned = {
  covariance,
  map,
  layout: { channelCount: nc, signalCount: ny, featureCount: F, steps },
} as unknown as Learned;
const values = [0, 1].map(() => Float64Array.from({ length: 80 }, uniform));
const target = denseTarget(learned, bank, values, [{ fromIndex: 5, toIndex: 60 }]);
const at = (c: number, f: number, h: number): number => map[(c * F + f) * steps + h]!;

describe('denseTarget', () => {
  it('keeps the own lags of the first six steps', () => {
    expect(target.lags).toEqual([1, 4]);
    expect(target.lagged.length).toBe(6 * 2);
    for (let h = 0; h < 6; h++) {
      expect([target.lagged[2 * h], target.lagged[2 * h + 1]]).toEqual([at(0, 3, h), at(0, 4, h)]);
    }
  });

  it('leaves what is left uncorrelated with every feature that is kept', () => {
    const kept = [0, 1, 2, 5, 6, 7];
    for (let h = 0; h < steps; h++) {
      const now = new Float64Array(p);
      [0, 1].forEach((c) => {
        for (let f = 0; f < 2; f++) now[c * F + f] = target.map[(2 * c + f) * steps + h]!;
        now[c * F + 2] = target.levelMap![c * steps + h]!;
      });
      if (h < 6) now.set(target.lagged.subarray(2 * h, 2 * h + 2), 3);
      const lost = now.map((value, f) => map[f * steps + h]! - value);
      for (const row of kept) {
        const together = lost.reduce((sum, value, f) => sum + value * covariance[row * p + f]!, 0);
        expect(Math.abs(together)).toBeLessThan(1e-10);
      }
      expect(lost.some((value) => Math.abs(value) > 1e-3)).toBe(true);
    }
  });

  it('is the map itself where there are no lags', () => {
    const without = { ...bank, lags: [], hasLevel: false };
    const small = {
      ...learned,
      layout: { ...learned.layout, featureCount: 2 },
      map: map.slice(0, 4 * steps),
    } as Learned;
    const plain = denseTarget(small, without, values, [{ fromIndex: 5, toIndex: 60 }]);
    expect(Array.from(plain.map)).toEqual(Array.from(small.map));
    expect(plain.levelMap).toBeNull();
    expect(plain.lags).toEqual([]);
  });
});
