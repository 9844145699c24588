/** Which stretches judge, and by what they were taught. */
import { describe, expect, it } from 'vitest';
import { makeEvidence, onwardEvidence } from '../../../trainer/identify/folds.ts';
import type { Moments } from '../../../trainer/identify/moments.ts';

/** A group of origins whose one feature tells which one it was. */
function group(place: number, origins: number): Moments {
  return {
    origins,
    features: Float64Array.of(10 ** place),
    future: Float64Array.of(0),
    energy: Float64Array.of(0),
    featureSums: Float64Array.of(0),
    futureSums: Float64Array.of(0),
  };
}

const groupsOf = (count: number, origins: number): Moments[] =>
  Array.from({ length: count }, (_, place) => group(place, origins));

describe('makeEvidence', () => {
  it('judges a short record on every group in turn, by all the others', () => {
    const { folds, weights, tie, onward } = makeEvidence(groupsOf(4, 100));
    expect(folds.map(({ judge }) => judge.features[0])).toEqual([1, 10, 100, 1000]);
    expect(folds.map(({ learn }) => learn.features[0])).toEqual([1110, 1101, 1011, 111]);
    expect([weights.shares, weights.power]).toEqual([[0.25, 0.25, 0.25, 0.25], 0.5]);
    // Nadeau & Bengio (2003): 1/n + 1/(n - 1) in place of 1/n.
    expect(weights.doubt ** 2).toBeCloseTo(4 * (1 / 4 + 1 / 3), 12);
    expect(tie).toBe(0.01);
    expect(onward?.folds.map(({ learn }) => learn.features[0])).toEqual([11, 111]);
  });

  it('judges a long record on what lies ahead, later folds counting by what they learned from', () => {
    const { folds, weights, tie } = makeEvidence(groupsOf(5, 1000));
    expect(folds.map(({ judge }) => judge.features[0])).toEqual([1000, 10_000]);
    expect(folds.map(({ learn }) => learn.features[0])).toEqual([111, 1111]);
    expect(weights.shares[0]).toBeCloseTo(3 / 7, 12);
    expect([weights.power, weights.doubt, tie]).toEqual([0, 1, 0.001]);
  });

  it('lets every group judge what the time before it taught', () => {
    const few = makeEvidence(groupsOf(2, 100), group(3, 500));
    expect(few.folds.map(({ learn, judge }) => [learn.features[0], judge.features[0]])).toEqual([
      [1000, 1],
      [1001, 10],
    ]);
    expect([few.weights.power, few.weights.doubt, few.tie, few.onward]).toEqual([0, 1, 0.001, undefined]);
    // Four times as long: what a group adds is let be, so that one solve serves all folds.
    const many = makeEvidence(groupsOf(2, 100), group(3, 800));
    expect(many.folds[1]!.learn).toBe(many.folds[0]!.learn);
    expect(many.folds.map(({ learn }) => learn.features[0])).toEqual([1000, 1000]);
  });

  it('does not turn round two groups', () => {
    const { folds } = makeEvidence(groupsOf(2, 30));
    expect(folds.map(({ learn, judge }) => [learn.features[0], judge.features[0]])).toEqual([[1, 10]]);
  });
});

describe('onwardEvidence', () => {
  it('never learns from what lies ahead, however short the record, and judges by what it is given', () => {
    const groups = groupsOf(4, 100);
    const { folds, weights } = onwardEvidence(
      groups,
      groups.map((one) => ({ ...one, features: one.features.map((value) => -value) })),
    );
    expect(folds.map(({ learn, judge }) => [learn.features[0], judge.features[0]])).toEqual([
      [11, -100],
      [111, -1000],
    ]);
    expect(weights.power).toBe(0.5);
  });
});
