/** The promises on segments can be broken, each by its own fault. */
import { expect, test } from 'vitest';
import { segmentVerdicts } from '../../../demo-fleet/stories/season-outcome.ts';

const kept = (desk: { segments: number; broken: number; doubled: number }): boolean[] =>
  segmentVerdicts('wet-well-1', { segments: 20, doubled: 2 }, desk).map((one) => one.isKept);

test('a lost, a broken and an unseen doubled segment each break one promise, and never make up for each other', () => {
  expect(kept({ segments: 20, broken: 0, doubled: 3 })).toEqual([true, true, true]);
  expect(kept({ segments: 19, broken: 0, doubled: 2 })).toEqual([false, true, true]);
  expect(kept({ segments: 21, broken: 1, doubled: 2 })).toEqual([false, false, true]);
  expect(kept({ segments: 20, broken: 0, doubled: 1 })).toEqual([true, true, false]);
});
