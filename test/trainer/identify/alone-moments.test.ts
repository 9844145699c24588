/** Channels that move each by itself: lagged products by their definition, and moments of readings that do so already. */
import { describe, expect, it } from 'vitest';
import { aheadAlone, laggedProducts } from '../../../trainer/identify/alone-moments.ts';
import { recursionInput, recursionMoments } from '../../../trainer/identify/recursion-moments.ts';
import type { ModalRecursion } from '../../../trainer/linalg/modal.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const next = recurrence(17);
const uniform = (): number => next() / 2 ** 31 - 1;
const recursion: ModalRecursion = {
  modes: {
    size: 3,
    first: Int32Array.of(0, 2),
    isComplex: Uint8Array.of(1, 0),
    re: Float64Array.of(0.7, 0.8),
    im: Float64Array.of(0.4, 0),
  },
  drive: Float64Array.from({ length: 6 }, uniform),
};

describe('laggedProducts', () => {
  it('are sums of products, faded evenly over eight times the slowest memory', () => {
    const change = Float64Array.from({ length: 300 }, uniform);
    const got = laggedProducts(change, recursion.modes, 2);
    const slowest = Math.hypot(0.7, 0.4);
    expect(got.length).toBe(Math.ceil(8 / (1 - slowest)));
    const at = (k: number): number => {
      let sum = 0;
      for (let t = 0; t + k < 300; t++) sum += change[t]! * change[t + k]!;
      return sum;
    };
    got.forEach((value, k) => {
      expect(value).toBeCloseTo((2 * at(k) * (1 - k / got.length)) / at(0), 10);
    });
  });

  it('of a channel that never moves are nothing', () => {
    expect(laggedProducts(new Float64Array(100), recursion.modes, 0).every((value) => value === 0)).toBe(true);
  });
});

describe('aheadAlone', () => {
  it('is the recursion unrolled', () => {
    const lagged = [0, 1].map(() => Float64Array.from({ length: 20 }, uniform));
    const got = aheadAlone(recursion, lagged);
    for (const c of [0, 1]) {
      let s = [0, 2, 4].map((k) => recursion.drive[k + c]!);
      const sum = [0, 0, 0];
      for (let j = 0; j + 1 < 20; j++) {
        s.forEach((value, k) => {
          sum[k]! += value * lagged[c]![j + 1]!;
        });
        s = [0.7 * s[0]! - 0.4 * s[1]!, 0.7 * s[1]! + 0.4 * s[0]!, 0.8 * s[2]!];
      }
      sum.forEach((value, k) => {
        expect(got[2 * k + c]).toBeCloseTo(value, 12);
      });
    }
  });
});

describe('recursionMoments with a share of channels moving alone', () => {
  const bank = { decays: [0.5, 0.9], resonators: [], lags: [] };
  const momentsOf = (values: Float64Array[], share: number): ReturnType<typeof recursionMoments> =>
    recursionMoments(recursionInput(values, [{ fromIndex: 1, toIndex: 600 }], bank, share), recursion);

  it('is that much more of the same where they move alone already', () => {
    const jumps = [1, 301].map((at) => Float64Array.from({ length: 600 }, (_, t) => (t >= at ? 1 : 0)));
    const [plain, more] = [momentsOf(jumps, 0), momentsOf(jumps, 0.5)];
    plain.covariance.forEach((value, k) => {
      expect(more.covariance[k]).toBeCloseTo(1.5 * value, 12);
    });
    plain.withBank.forEach((value, k) => {
      expect(more.withBank[k]).toBeCloseTo(1.5 * value, 12);
    });
  });

  it('breaks up channels that always move together', () => {
    const one = Float64Array.from({ length: 600 }, uniform);
    const together = [one, one.slice()];
    const shared = (share: number): number => {
      const { withBank } = momentsOf(together, share);
      return withBank[0]! - withBank[2]!;
    };
    expect(Math.abs(shared(0))).toBeLessThan(1e-12);
    expect(Math.abs(shared(0.5))).toBeGreaterThan(1e-3);
  });
});
