/** The featured kind: a chaotic plant that no linear map follows, and a linear one that needs nothing more. */
import { beforeAll, describe, expect, test } from 'vitest';
import { tryFeatured } from '../../../trainer/featured/featured.ts';
import { replayError } from '../../../trainer/judge/replay-scores.ts';
import type { Attempt, Candidate } from '../../../trainer/kinds/candidate.ts';
import { tryLinear } from '../../../trainer/kinds/linear.ts';
import { attemptOf } from '../../support/attempt.ts';
import { chaoticSeries, linearSeries } from './support.ts';

describe('a chaotic plant', () => {
  let attempt: Attempt;
  let candidate: Candidate | null;
  const judged = { fromTick: 1200, toTick: 1500 };
  beforeAll(() => {
    attempt = attemptOf(chaoticSeries(1500), 8, 1e-4);
    candidate = tryFeatured(attempt);
  });

  test('errs a small part of what the linear kind does', () => {
    if (candidate === null) throw new Error('expected a candidate');
    const linear = replayError(tryLinear(attempt).rounded, attempt.series, judged);
    expect(replayError(candidate.rounded, attempt.series, judged)).toBeLessThan(0.5 * linear);
  });

  test('fits the bytes, and rounding costs little of what was gained', () => {
    if (candidate === null) throw new Error('expected a candidate');
    expect(attempt.bytesLeft(candidate.sections)).toBeGreaterThanOrEqual(0);
    const exact = replayError(candidate.float, attempt.series, judged);
    expect(replayError(candidate.rounded, attempt.series, judged) / exact).toBeLessThan(1.2);
  });

  test('learned again from the same ticks it is the same', () => {
    if (candidate === null) throw new Error('expected a candidate');
    expect(candidate.again(attempt.prepared.learnTicks).sections).toEqual(candidate.sections);
  });
});

test('a linear plant gets no features', () => {
  expect(tryFeatured(attemptOf(linearSeries(1500), 8, 1e-3))).toBeNull();
});
