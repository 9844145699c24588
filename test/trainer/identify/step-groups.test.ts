/** Groups of steps: no step lost, none twice, each judged. */
import { describe, expect, it } from 'vitest';
import { stepGroups, trialSteps } from '../../../trainer/identify/step-groups.ts';

describe('stepGroups', () => {
  it.each([1, 2, 3, 7, 24, 48, 96, 1000])('covers a horizon of %i once', (horizon) => {
    const covered = stepGroups(horizon).flatMap(({ from, to }) =>
      Array.from({ length: to - from + 1 }, (_, k) => from + k),
    );
    expect(covered).toEqual(Array.from({ length: horizon }, (_, h) => h + 1));
  });

  it('doubles', () => {
    const ends = stepGroups(96).map(({ to }) => to);
    expect(ends).toEqual([1, 3, 6, 12, 24, 48, 96]);
  });

  it.each([1, 7, 24, 1000])('judges every group of a horizon of %i at a step of its own', (horizon) => {
    const groups = stepGroups(horizon);
    const trial = trialSteps(horizon);
    expect([...new Set(trial.groups)]).toEqual(groups.map((_, g) => g));
    trial.steps.forEach((step, k) => {
      const { from, to } = groups[trial.groups[k]!]!;
      expect(step >= from && step <= to).toBe(true);
    });
  });
});
