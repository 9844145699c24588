import { describe, expect, it } from 'vitest';
import { DEMO_SITES } from '../../../demo-fleet/plants/sites.ts';
import {
  faultsOf,
  HABITS,
  LEAST_SKILL,
  PLANNED,
  PLANNED_SITE,
  timetableOf,
} from '../../../demo-fleet/stories/season-plan.ts';

describe('the season', () => {
  it('keeps its order however many days it is given', () => {
    for (const days of [4, 5, 12, 30]) {
      const { learned, powerCut, linkCut, deskAway, deskBack, worn, refitted, planWrong, planRight, end } =
        timetableOf(days);
      const order = [0, learned, powerCut, linkCut, deskAway, deskBack, worn, refitted, end];
      expect(order).toEqual([...order].sort((a, b) => a - b));
      expect([learned, planWrong, planRight, end].every((day, k, all) => k === 0 || day > all[k - 1])).toBe(true);
      expect(end).toBe(days);
      // Long enough to be judged on: no stretch shorter than half a day.
      for (const length of [worn - learned, refitted - worn, end - refitted])
        expect(length).toBeGreaterThanOrEqual(0.5);
    }
  });

  it('promises skill of every site, and plans an input that is there for a signal that is there', () => {
    expect(Object.keys(LEAST_SKILL).sort()).toEqual(DEMO_SITES.map(({ name }) => name).sort());
    for (const least of Object.values(LEAST_SKILL)) expect(least > 0.2 && least < 1).toBe(true);
    const channels = DEMO_SITES.find(({ name }) => name === PLANNED_SITE)?.channels ?? [];
    expect(channels.filter(({ isPlanned }) => isPlanned).map(({ name }) => name)).toEqual([PLANNED.input]);
    expect(channels.find(({ name }) => name === PLANNED.signal)?.role).toBe('signal');
  });

  it('names a habit for every site, and only channels that are there in its faults', () => {
    expect(HABITS.length).toBe(DEMO_SITES.length);
    const faults = DEMO_SITES.flatMap((site) => faultsOf(site.name, 1440).map((fault) => ({ site, fault })));
    expect(faults.length).toBeGreaterThan(2);
    for (const { site, fault } of faults) {
      expect(fault.channel).toBeLessThan(site.channels.length);
      expect(fault.until).toBeGreaterThan(fault.from);
    }
  });
});
