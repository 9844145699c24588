/** The plant of the long histories: the same readings however they are asked for, of the shape its description promises. */
import { parseSite } from '@stillwell/protocol';
import { describe, expect, test } from 'vitest';
import { FIRST_TICK, PlantStream, plantSite, SIGNAL_COUNT, SIGNAL_NAMES, TICK_MS } from './training-plant.ts';

const TICKS = 30_000;
const DAY = 1440;

function readings(seed: number, pieces: readonly number[]): Float64Array {
  const plant = new PlantStream(seed);
  const all = new Float64Array(pieces.reduce((sum, ticks) => sum + ticks, 0) * SIGNAL_COUNT);
  let at = 0;
  for (const ticks of pieces) {
    plant.next(all.subarray(at, at + ticks * SIGNAL_COUNT));
    at += ticks * SIGNAL_COUNT;
  }
  return all;
}

describe('the plant', () => {
  const rows = readings(3, [TICKS]);
  const column = (i: number): number[] => Array.from({ length: TICKS }, (_, t) => rows[t * SIGNAL_COUNT + i]!);

  test('is the same in one piece and in several, and another with another seed', () => {
    expect(readings(3, [1, 7001, TICKS - 7002])).toEqual(rows);
    expect(readings(4, [TICKS])).not.toEqual(rows);
  });

  test('has gaps, few and short, and prints hundredths', () => {
    const missing = rows.filter(Number.isNaN).length;
    expect(missing).toBeGreaterThan(0);
    expect(missing / rows.length).toBeLessThan(0.001);
    const read = rows.filter((value) => !Number.isNaN(value));
    expect(read.every((value) => Math.abs(100 * value - Math.round(100 * value)) < 1e-6)).toBe(true);
  });

  test('follows the day more than its own noise, and is steady', () => {
    for (let i = 0; i < SIGNAL_COUNT; i++) {
      const values = column(i);
      const apart = (lag: number): number => {
        const steps = values.slice(lag).map((value, t) => (value - values[t]!) ** 2);
        const known = steps.filter((step) => !Number.isNaN(step));
        return known.reduce((sum, step) => sum + step, 0) / known.length;
      };
      expect(apart(DAY), SIGNAL_NAMES[i]).toBeLessThan(apart(DAY / 2));
      expect(apart(1), SIGNAL_NAMES[i]).toBeLessThan(apart(DAY));
    }
  });

  test('has a site file that says so', () => {
    const site = parseSite(plantSite(), 'site.yaml');
    expect([site.tickMs, site.signals.map(({ name }) => name)]).toEqual([TICK_MS, SIGNAL_NAMES]);
    expect(new Date(FIRST_TICK * TICK_MS).toISOString()).toBe('2004-01-01T00:00:00.000Z');
  });
});
