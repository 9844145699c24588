import { describe, expect, test } from 'vitest';
import type { Aggregate, Plan } from '../../../protocol/index.ts';
import { planAtTick } from '../../../runtime/ingest/plan-ticks.ts';

const TICK = 60_000;
/** 1 from the start of tick 10, 4 from half-way through tick 11, 2 from the start of tick 13, up to the end of tick 13. */
const plan: Plan = {
  timesMs: [10 * TICK, 11.5 * TICK, 13 * TICK],
  values: [1, 4, 2],
  endMs: 14 * TICK,
  issuedAtMs: null,
};
const at = (how: Aggregate): number[] => [9, 10, 11, 12, 13, 14].map((tick) => planAtTick(plan, how, tick, TICK));

describe('a plan on ticks', () => {
  test.each<[Aggregate, readonly number[]]>([
    ['last', [Number.NaN, 1, 4, 4, 2, Number.NaN]],
    ['mean', [Number.NaN, 1, 2.5, 4, 2, Number.NaN]],
    ['min', [Number.NaN, 1, 1, 4, 2, Number.NaN]],
    ['max', [Number.NaN, 1, 4, 4, 2, Number.NaN]],
  ])('%s', (how, expected) => expect(at(how)).toEqual(expected));

  test.each<Aggregate>(['sum', 'increment'])('%s: amounts are spread to the next value, and none is lost', (how) => {
    const amounts = at(how);
    expect([...amounts]).toEqual([Number.NaN, 1 / 1.5, 0.5 / 1.5 + 4 / 3, 8 / 3, 2, Number.NaN]);
    expect(amounts.filter((one) => !Number.isNaN(one)).reduce((sum, one) => sum + one, 0)).toBeCloseTo(1 + 4 + 2, 12);
  });

  test('of a tick partly before the plan only the part that is planned counts', () => {
    const late = { ...plan, timesMs: [10.75 * TICK], values: [3], endMs: 11.25 * TICK };
    expect(planAtTick(late, 'mean', 10, TICK)).toBe(3);
    expect(planAtTick(late, 'last', 11, TICK)).toBe(3);
    expect(planAtTick(late, 'sum', 10, TICK)).toBe(1.5);
  });

  test('steps finer than a tick, whatever their number', () => {
    const fine = {
      timesMs: Array.from({ length: 1000 }, (_, k) => 10 * TICK + k * 600),
      values: Array.from({ length: 1000 }, (_, k) => k),
      endMs: 20 * TICK,
      issuedAtMs: null,
    };
    expect(planAtTick(fine, 'last', 10, TICK)).toBe(99);
    expect(planAtTick(fine, 'mean', 19, TICK)).toBeCloseTo(949.5, 9);
    expect(planAtTick(fine, 'min', 19, TICK)).toBe(900);
  });
});
