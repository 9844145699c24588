/** One pass over a cut against every block gathered by itself and added up; and what is refused or said of wide plants. */
import { describe, expect, it } from 'vitest';
import { type Bank, featureCount } from '../../../trainer/identify/bank.ts';
import { partition } from '../../../trainer/identify/blocks.ts';
import { gatherCut, gatherSum } from '../../../trainer/identify/gather.ts';
import { learn } from '../../../trainer/identify/learn.ts';
import { addMoments, pickMoments } from '../../../trainer/identify/moment-sets.ts';
import { gatherMoments, type Moments } from '../../../trainer/identify/moments.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const ticks = 700;
const horizon = 6;
const next = recurrence(21);
const values = [0, 1].map(() => Float64Array.from({ length: ticks }, () => next() / 2 ** 31 - 1));
const bank: Bank = { decays: [0.5, 0.9], resonators: [[0.8, 0.3]], lags: [1, 4] };
const input = { values, signalCount: 2, bank, horizon };
const layout = { channelCount: 2, signalCount: 2, featureCount: featureCount(bank), steps: horizon };
const all = Array.from({ length: layout.featureCount }, (_, f) => f);

function expectAlike(got: Moments, expected: Moments): void {
  expect(got.origins).toBe(expected.origins);
  for (const key of ['features', 'future', 'energy', 'featureSums', 'futureSums'] as const) {
    // Sums of a few hundred numbers below ten, in another order.
    for (let k = 0; k < expected[key].length; k++) expect(got[key][k]!).toBeCloseTo(expected[key][k]!, 9);
  }
}

/** Gaps as `Filled` marks them: 1. */
function cutWith(gaps: readonly (readonly [number, number])[]): ReturnType<typeof partition> {
  const inLongGap = new Uint8Array(ticks);
  for (const [from, to] of gaps) inLongGap.fill(1, from, to);
  return partition(450, 200, 20, horizon, inLongGap);
}

describe.each([
  ['without gaps', []],
  [
    'with gaps in both parts',
    [
      [100, 130],
      [300, 310],
      [520, 540],
    ],
  ],
  ['with no origin left to calibrate', [[440, 650]]],
] as const)('gatherCut, %s', (_, gaps) => {
  const cut = cutWith(gaps);
  const got = gatherCut(input, layout, cut, [2, 6]);
  const of = (blocks: (typeof cut.groups)[number]): Moments[] => gatherMoments(input, blocks);
  const groups = cut.groups.filter((blocks) => blocks.length > 0);

  it('has every group at the trial steps', () => {
    expect(got.groups.length).toBe(groups.length);
    groups.forEach((blocks, g) => {
      expectAlike(got.groups[g]!, pickMoments(addMoments(of(blocks)), layout, all, [2, 6]));
    });
  });

  it('has both parts in full', () => {
    const early = cut.groups.slice(0, cut.learnGroups).flat();
    const inOrder = [...early, ...cut.between].sort((a, b) => a.fromIndex - b.fromIndex);
    expectAlike(got.learning, addMoments(of(inOrder)));
    expectAlike(gatherSum(input, inOrder), got.learning);
    const late = cut.groups.slice(cut.learnGroups).flat();
    const last = cut.groups
      .slice(0, cut.learnGroups)
      .filter((blocks) => blocks.length > 0)
      .at(-1)!;
    expectAlike(got.calibration, addMoments(of(late.length > 0 ? late : last)));
  });
});

describe('learn, of many signals', () => {
  const many = (count: number, length: number): Parameters<typeof learn>[0] => ({
    filled: {
      values: Array.from({ length: count }, () => Float64Array.from({ length }, () => next() / 2 ** 31 - 1)),
      isRead: [],
      inLongGap: new Uint8Array(length),
    },
    signalCount: count,
    horizon: 2,
    periodTicks: 0,
    otherPeriods: [],
    learnTicks: Math.round(0.6 * length),
    calibrateTicks: Math.round(0.2 * length),
    round: null,
    earlier: null,
  });

  it('says what they go without', () => {
    const { notes, choice } = learn(many(60, 300));
    expect(notes.join(' ')).toMatch(/60 signals and inputs are many for one model: of each one's past 12 features/);
    expect(choice.kept.length).toBeLessThanOrEqual(12);
    expect(learn(many(2, 300)).notes).toEqual([]);
  });

  it('refuses more than memory holds, before any work', () => {
    const wide = { ...many(200, 3000), horizon: 300 };
    expect(() => learn(wide)).toThrow(/200 signals over a horizon of 300 ticks are too many.*Shorten the horizon/);
  });
});
