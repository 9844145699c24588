import { describe, expect, test } from 'vitest';
import { PlanRecord } from '../../../runtime/ingest/plan-record.ts';

const H = 16;

/** Runs ticks 0 to `ticks`, with what is planned from each tick on, and what comes. */
function run(ticks: number, plan: (from: number, tick: number) => number, came: (tick: number) => number): PlanRecord {
  const record = new PlanRecord(H);
  const window = new Float64Array(H);
  for (let t = 0; t < ticks; t++) {
    record.came(t, came(t));
    for (let h = 1; h <= H; h++) window[h - 1] = plan(t, t + h);
    record.planned(t, window, 0);
  }
  return record;
}

describe('the record of plans', () => {
  test('a kept plan has no error', () => {
    const record = run(
      64,
      (_, tick) => tick % 5,
      (tick) => tick % 5,
    );
    expect(record.error).toBe(0);
    expect(record.count).toBeGreaterThanOrEqual(3 * H);
  });

  test('a plan that is off by two is off by two', () => {
    expect(
      run(
        64,
        () => 3,
        () => 5,
      ).error,
    ).toBe(2);
  });

  test('a plan put right every tick for the next one alone does not look right', () => {
    // Says for all ticks ahead what just was, while the truth alternates every four ticks.
    const truth = (tick: number): number => Math.floor(tick / 4) % 2;
    const record = run(200, (from) => truth(from), truth);
    expect(record.error).toBeGreaterThan(0.35);
  });

  test('forgets what is older than a horizon or so', () => {
    const record = run(
      120,
      () => 0,
      (tick) => (tick < 60 ? 9 : 0),
    );
    expect(record.error).toBe(0);
  });

  test('missing readings and unplanned ticks are no evidence', () => {
    expect(
      run(
        64,
        () => Number.NaN,
        () => 1,
      ).error,
    ).toBeNull();
    expect(
      run(
        64,
        () => 1,
        () => Number.NaN,
      ).error,
    ).toBeNull();
    expect(
      run(
        64,
        (_, tick) => (tick % 2 === 0 ? 1 : Number.NaN),
        () => 1,
      ).error,
    ).toBe(0);
  });

  test('beside it, how far off holding the last value would have been', () => {
    // Climbs by one a tick: held h ticks, a value is h off; 8 windows of 16 ticks hold steps 1 to 16 about alike.
    const record = run(
      200,
      (_, tick) => tick,
      (tick) => tick,
    );
    expect(record.error).toBe(0);
    expect(record.heldError).toBeGreaterThan(4);
    expect(record.heldError).toBeLessThan(12);
    expect(new PlanRecord(4).heldError).toBeNull();
  });

  test('a horizon of one tick', () => {
    const record = new PlanRecord(1);
    record.planned(4, Float64Array.of(2), 0);
    record.came(5, 3);
    expect(record.error).toBe(1);
  });
});
