import { parsePlan } from '@stillwell/protocol';
import { describe, expect, it } from 'vitest';
import { PlanFeed } from '../../demo-fleet/plan-feed.ts';
import { DefrostTimes } from '../../demo-fleet/plants/defrost.ts';

const TICK = 120_000;
const FIRST = Date.UTC(2025, 3, 28) / TICK;
const PER_DAY = 720;
const LATE = 76 * 60_000;
const times = new DefrostTimes({ windows: [[2, 6]], minutes: 20, power: 10 }, 'store', 4, TICK, 0);
const wrong = [FIRST + 500, FIRST + 900] as const;

function feedDays(days: number): { tick: number; text: string }[] {
  const told: { tick: number; text: string }[] = [];
  let now = FIRST;
  const publish = (text: string): void => {
    told.push({ tick: now, text });
  };
  const feed = new PlanFeed({ times, tickMs: TICK, firstTick: FIRST, wrong, lateMs: LATE, publish });
  for (; now < FIRST + days * PER_DAY; now++) feed.atTick(now);
  expect(feed.published).toBe(told.length);
  return told;
}

const planAt = (tick: number, text: string) =>
  parsePlan(Buffer.from(text), { tickMs: TICK, horizon: 60, range: [0, 1], nowMs: tick * TICK });
const valueAt = (plan: ReturnType<typeof planAt>, ms: number): number =>
  plan.values[plan.timesMs.findLastIndex((time) => time <= ms)]!;

describe('the plan of the defrosts', () => {
  it('is told every six hours, and at once when it goes wrong or is put right', () => {
    const ticks = feedDays(2).map(({ tick }) => tick - FIRST);
    expect(ticks).toEqual([0, 180, 360, 500, 540, 720, 900, 1080, 1260]);
  });

  it('is a plan as the gateway reads it, reaches 36 hours, and says what will be done', () => {
    for (const { tick, text } of feedDays(2)) {
      const plan = planAt(tick, text);
      expect(plan.issuedAtMs).toBe(tick * TICK);
      expect(plan.endMs - tick * TICK).toBe(36 * 3_600_000);
      const lateMs = tick >= wrong[0] && tick < wrong[1] ? LATE : 0;
      for (let k = 0; k < 36 * 30; k++) {
        const ms = (tick + k) * TICK;
        expect(valueAt(plan, ms)).toBe(times.isOn(ms - lateMs) ? 1 : 0);
      }
    }
  });
});
