import { expect, test } from 'vitest';
import { truceMs } from '../../../runtime/mqtt/back-off.ts';

test('two that fight for a client id leave each other alone for longer and longer, but never for good', () => {
  expect([0, 1, 2].map((count) => truceMs(count, 0.5))).toEqual([0, 0, 0]);
  expect([3, 4, 5, 6].map((count) => truceMs(count, 0))).toEqual([30_000, 60_000, 120_000, 240_000]);
  expect(truceMs(3, 0.5)).toBe(45_000);
  expect(truceMs(1_000_000, 1 - Number.EPSILON)).toBe(1_800_000);
});
