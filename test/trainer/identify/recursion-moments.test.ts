/** Moments by Stein equations against the slow, obvious route: the recursion run tick by tick, and its products summed. */
import { describe, expect, it } from 'vitest';
import { designBank } from '../../../trainer/identify/bank.ts';
import type { Block } from '../../../trainer/identify/moments.ts';
import { bankRecursion, recursionInput, recursionMoments } from '../../../trainer/identify/recursion-moments.ts';
import type { ModalRecursion } from '../../../trainer/linalg/modal.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const next = recurrence(5);
const uniform = (): number => next() / 2 ** 31 - 1;
const values = Array.from({ length: 3 }, (_, c) => {
  let level = c;
  return Float64Array.from({ length: 300 }, (_, t) => {
    level = 0.95 * level + uniform();
    return level + Math.sin(t / 4 + c);
  });
});
const blocks: readonly Block[] = [
  { fromIndex: 1, toIndex: 90 },
  { fromIndex: 90, toIndex: 130 },
  { fromIndex: 170, toIndex: 300 },
];
const { decays, resonators } = designBank({
  periodTicks: 24,
  otherPeriods: [],
  horizon: 6,
  learnTicks: 300,
  channelCount: 3,
});
const bank = { decays, resonators, lags: [] };
const recursion: ModalRecursion = {
  modes: {
    size: 5,
    first: Int32Array.of(0, 2, 4),
    isComplex: Uint8Array.of(1, 1, 0),
    re: Float64Array.of(0.9, -0.2, 0.97),
    im: Float64Array.of(0.3, 0.6, 0),
  },
  drive: Float64Array.from({ length: 15 }, uniform),
};

/** Numbers of a recursion after every tick, from its matrix. */
function runSlowly({ modes, drive }: ModalRecursion, start: readonly number[]): number[][] {
  const n = modes.size;
  const a = Array.from({ length: n }, () => new Array<number>(n).fill(0));
  modes.first.forEach((at, k) => {
    a[at]![at] = modes.re[k]!;
    if (modes.isComplex[k] === 0) return;
    a[at]![at + 1] = -modes.im[k]!;
    a[at + 1]![at] = modes.im[k]!;
    a[at + 1]![at + 1] = modes.re[k]!;
  });
  const out = [[...start]];
  for (let t = 1; t < values[0]!.length; t++) {
    const last = out[t - 1]!;
    out.push(
      a.map((row, i) => {
        const kept = row.reduce((sum, weight, j) => sum + weight * last[j]!, 0);
        return values.reduce((sum, y, c) => sum + drive[i * 3 + c]! * (y[t]! - y[t - 1]!), kept);
      }),
    );
  }
  return out;
}

function meanProducts(left: readonly (readonly number[])[], right: readonly (readonly number[])[]): number[] {
  const out = new Array<number>(left[0]!.length * right[0]!.length).fill(0);
  let origins = 0;
  for (const { fromIndex, toIndex } of blocks) {
    for (let t = fromIndex; t < toIndex; t++, origins++) {
      left[t]!.forEach((x, i) => {
        right[t]!.forEach((y, j) => {
          out[i * right[0]!.length + j]! += x * y;
        });
      });
    }
  }
  return out.map((sum) => sum / origins);
}

const expectClose = (got: Float64Array, expected: readonly number[]): void => {
  const size = expected.reduce((most, value) => Math.max(most, Math.abs(value)), 0);
  expect(got.length).toBe(expected.length);
  // Stein equations lose a few digits where poles lie near the circle.
  got.forEach((value, k) => {
    expect(Math.abs(value - expected[k]!)).toBeLessThan(1e-10 * size);
  });
};

describe('recursionMoments', () => {
  const input = recursionInput(values, blocks, bank, 0);
  const slow = runSlowly(recursion, [0, 0, 0, 0, 0]);
  const features = runSlowly(bankRecursion(bank, 3), new Array<number>(input.bank.recursion.modes.size).fill(0));
  const levels = Array.from({ length: 300 }, (_, t) => values.map((y) => -y[t]!));
  const moments = recursionMoments(input, recursion);

  it('of a recursion with itself, over blocks with a gap between them', () => {
    expectClose(moments.covariance, meanProducts(slow, slow));
  });

  it('with the bank and with the levels', () => {
    expectClose(moments.withBank, meanProducts(slow, features));
    expectClose(moments.withLevels, meanProducts(slow, levels));
  });

  it('of bank and levels', () => {
    expectClose(input.covariance, meanProducts(features, features));
    expectClose(input.levelsWithBank, meanProducts(levels, features));
    expectClose(input.levelCovariance, meanProducts(levels, levels));
  });

  it('would show a drive of another sign', () => {
    const turned = recursionMoments(input, { ...recursion, drive: recursion.drive.map((value) => -value) });
    expect(turned.withBank[0]).toBeCloseTo(-moments.withBank[0]!, 12);
    expect(Math.abs(turned.withBank[0]! - moments.withBank[0]!)).toBeGreaterThan(1e-6);
  });
});
