import { describe, expect, it } from 'vitest';
import { buildPlant, defrostTimesOf } from '../../../demo-fleet/plants/build.ts';
import { DefrostTimes } from '../../../demo-fleet/plants/defrost.ts';
import { DEMO_SITES } from '../../../demo-fleet/plants/sites.ts';

const START = Date.UTC(2025, 3, 7);
const DAY = 86_400_000;
const TICK = 120_000;
const OFFSET_HOURS = 1;
const design = {
  windows: [
    [0, 7],
    [17, 23],
  ],
  minutes: 20,
  power: 10,
} as const;
const times = (seed: number): DefrostTimes => new DefrostTimes(design, 'store', seed, TICK, OFFSET_HOURS);
const starts = (one: DefrostTimes, days: number): number[] =>
  one
    .commands(START, START + days * DAY)
    .filter(({ value }) => value === 1)
    .map(({ timeMs }) => timeMs);

describe('planned defrosts', () => {
  it('run once in each window of the local day, from whole ticks, at another time every day', () => {
    const begun = starts(times(1), 20);
    const hours = begun.map((ms) => (ms / 3_600_000 + OFFSET_HOURS) % 24);
    // From 01:00 local on, since the plan is asked for from midnight UTC: the first night's run may lie before it.
    expect(begun.length).toBeGreaterThanOrEqual(39);
    expect(begun.length).toBeLessThanOrEqual(40);
    for (const hour of hours) expect((hour >= 0 && hour < 7) || (hour >= 17 && hour < 23)).toBe(true);
    for (const ms of begun) expect(ms % TICK).toBe(0);
    expect(new Set(hours.map((hour) => hour.toFixed(3))).size).toBeGreaterThan(30);
  });

  it('are the same under the same seed alone', () => {
    expect(starts(times(1), 10)).toEqual(starts(times(1), 10));
    expect(starts(times(1), 10)).not.toEqual(starts(times(2), 10));
  });

  it('say of every moment what their changes say', () => {
    const one = times(3);
    const changes = one.commands(START, START + 3 * DAY);
    for (let ms = START; ms < START + 3 * DAY; ms += TICK) {
      const ruling = changes.findLast(({ timeMs }) => timeMs <= ms);
      expect(one.isOn(ms)).toBe(ruling?.value === 1);
    }
    expect(changes.map(({ timeMs }) => timeMs)).toEqual(changes.map(({ timeMs }) => timeMs).sort((a, b) => a - b));
  });

  it('are what the plant does: its coil warms while they run, its compressor rests, and its room warms behind', () => {
    const site = DEMO_SITES.find(({ name }) => name === 'tessenby')!;
    const planned = defrostTimesOf(site, 5)!;
    const plant = buildPlant(site, 5, START);
    const names = site.channels.map(({ name }) => name);
    const at = (name: string): number => plant.values[names.indexOf(name)];
    let before = { suction: Number.NaN, room: Number.NaN };
    let runs = 0;
    for (let k = 0; k < (4 * DAY) / TICK; k++) {
      const ms = START + k * TICK;
      const wasOn = at('defrost') === 1;
      plant.step(ms);
      expect(at('defrost')).toBe(planned.isOn(ms) ? 1 : 0);
      if (at('defrost') === 1 && !wasOn) before = { suction: at('suction'), room: at('room') };
      if (at('defrost') === 1) expect(at('power')).toBeCloseTo(10, 9);
      if (planned.isOn(ms) && !planned.isOn(ms + TICK)) {
        runs++;
        // Ice melts: the coil must pass 0 °C; the room must stay below its upper limit.
        expect(at('suction')).toBeGreaterThan(0);
        expect(at('suction') - before.suction).toBeGreaterThan(10);
        expect(at('room') - before.room).toBeGreaterThan(0.3);
        expect(at('room')).toBeLessThan(-12);
      }
    }
    expect(runs).toBeGreaterThanOrEqual(11);
  });

  it('are not there where frost thaws by itself', () => {
    expect(DEMO_SITES.filter((site) => defrostTimesOf(site, 1) !== null).map(({ name }) => name)).toEqual(['tessenby']);
  });
});
