/** The promises on plans can be broken, each by its own fault. */
import { expect, test } from 'vitest';
import type { Score } from '../../../demo-fleet/scores.ts';
import { type PlanOutcome, planVerdicts } from '../../../demo-fleet/stories/season-defrosts.ts';

const score = (mse: number): Score => ({ mse }) as Score;
const counts = { forecasts: 900, planned: 900, off: 0, told: 0, worst: 0, usual: 0.08 };
const good: PlanOutcome = {
  site: 'store',
  under: score(0.7),
  without: score(0.9),
  wrongUnder: score(1.2),
  wrongWithout: score(0.9),
  right: counts,
  wrong: { ...counts, off: 200, told: 200, worst: 0.3 },
  published: 12,
};
const kept = (change: Partial<PlanOutcome>): boolean[] => planVerdicts({ ...good, ...change }).map((one) => one.isKept);

test('a plan that brings nothing, is not used, is not reported or is reported without cause breaks one promise each', () => {
  expect(kept({})).toEqual([true, true, true, true]);
  expect(kept({ under: score(0.9) })).toEqual([false, true, true, true]);
  expect(kept({ under: null })).toEqual([false, true, true, true]);
  expect(kept({ right: { ...counts, planned: 899 } })).toEqual([true, false, true, true]);
  expect(kept({ wrong: { ...counts, off: 200, told: 100 } })).toEqual([true, true, false, true]);
  expect(kept({ wrong: counts })).toEqual([true, true, false, true]);
  expect(kept({ right: { ...counts, off: 3, told: 3 } })).toEqual([true, true, true, false]);
});
