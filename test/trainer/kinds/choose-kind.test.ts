/** Where the numbers of one kind do not allow a model, a fit that may choose takes another; one that asked for it is told. */
import { describe, expect, test } from 'vitest';
import { encode } from '../../../protocol/index.ts';
import type { Attempt } from '../../../trainer/kinds/candidate.ts';
import { chooseKind } from '../../../trainer/kinds/choose-kind.ts';
import { tryDense } from '../../../trainer/kinds/dense.ts';
import { attemptOf } from '../../support/attempt.ts';
import { seriesOf } from '../../support/history.ts';
import { seededNumbers } from '../../support/models.ts';

/** A week drawn once and white noise: what a round leaves is noise less noise, whose level no recursion is left with. */
function noisyWeeks(ticks: number): Float64Array {
  const random = seededNumbers(6);
  const week = Float64Array.from({ length: 168 }, random);
  return Float64Array.from({ length: ticks }, (_, t) => Math.round(100 * (5 * week[t % 168]! + random())) / 100);
}

describe('a history that the dense kind cannot be solved for', () => {
  const attempt = attemptOf(seriesOf(['weeks'], [noisyWeeks(1400)]), 12, 0.01);
  /** Little room, so that the dense kind is tried beside the linear one. */
  const tight: Attempt = { ...attempt, bytesLeft: (sections) => 700 - encode(sections).length };

  test('is fitted all the same where the kind may be chosen', () => {
    expect(() => tryDense(tight)).toThrow(/not positive definite/);
    expect(chooseKind(tight).candidate.kind).not.toBe('dense');
  });

  test('is refused where that kind was asked for', () => {
    const asked = { ...tight, options: { ...tight.options, kind: 'dense' as const } };
    expect(() => chooseKind(asked)).toThrow(/not positive definite/);
  });
});
