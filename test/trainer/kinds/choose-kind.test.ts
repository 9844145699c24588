/** Where the numbers of one kind do not allow a model, a fit that may choose takes another; one that asked for it is told. */
import { describe, expect, test } from 'vitest';
import { encode } from '../../../protocol/index.ts';
import type { Attempt } from '../../../trainer/kinds/candidate.ts';
import { chooseKind } from '../../../trainer/kinds/choose-kind.ts';
import { tryDense } from '../../../trainer/kinds/dense.ts';
import { cholesky } from '../../../trainer/linalg/cholesky.ts';
import { attemptOf } from '../../support/attempt.ts';
import { seriesOf } from '../../support/history.ts';
import { seededNumbers } from '../../support/models.ts';

/** Not positive definite once the dense kind asks for its bytes: its own solves met no history yet that they fail on. */
function failsOnDense(attempt: Attempt): Attempt {
  const bytesLeft: Attempt['bytesLeft'] = (sections) => {
    if (sections.kind === 'dense') cholesky(Float64Array.of(1, 0, 2, 1), 2);
    return 700 - encode(sections).length;
  };
  return { ...attempt, bytesLeft };
}

describe('a history that the dense kind cannot be solved for', () => {
  const random = seededNumbers(6);
  const noise = Float64Array.from({ length: 600 }, () => Math.round(100 * random()) / 100);
  // Little room, so that the dense kind is tried beside the linear one.
  const failing = failsOnDense(attemptOf(seriesOf(['noise'], [noise]), 12, 0.01));

  test('is fitted all the same where the kind may be chosen', () => {
    expect(() => tryDense(failing)).toThrow(/not positive definite/);
    expect(chooseKind(failing).candidate.kind).not.toBe('dense');
  });

  test('is refused where that kind was asked for', () => {
    const asked = { ...failing, options: { ...failing.options, kind: 'dense' as const } };
    expect(() => chooseKind(asked)).toThrow(/not positive definite/);
  });
});
