/** How often a signal is read, found though readings are missing. */
import { describe, expect, test } from 'vitest';
import { cadenceOf, suggestTick } from '../../../trainer/history/cadence.ts';
import { seededNumbers } from '../../support/models.ts';

const HOUR = 3_600_000;

function readAt(times: readonly number[]) {
  return { name: 'level', times: Float64Array.from(times), values: new Float64Array(times.length).fill(1) };
}

function hourly(missingShare: number) {
  const random = seededNumbers(5);
  return readAt(Array.from({ length: 3000 }, (_, n) => n * HOUR).filter(() => random() >= missingShare));
}

describe('the usual interval', () => {
  test.each([0, 0.2, 0.45, 0.6, 0.7, 0.8])('of an hourly log with a share of %d missing is an hour', (missingShare) => {
    expect(cadenceOf(hourly(missingShare), null).intervalMs).toBe(HOUR);
    expect(suggestTick([cadenceOf(hourly(missingShare), null).intervalMs])).toBe(HOUR);
  });

  test('and so though its clock wavers', () => {
    const random = seededNumbers(6);
    const { times } = hourly(0.8);
    const wavering = readAt(Array.from(times, (time) => time + Math.round(20_000 * random())));
    expect(suggestTick([cadenceOf(wavering, null).intervalMs])).toBe(HOUR);
  });

  test('of a log that keeps every second hour, with a few odd readings between, stays two hours', () => {
    const times = Array.from({ length: 1000 }, (_, n) => 2 * n * HOUR);
    const odd = Array.from({ length: 60 }, (_, n) => (32 * n + 1) * HOUR);
    expect(cadenceOf(readAt([...times, ...odd].sort((a, b) => a - b)), null).intervalMs).toBe(2 * HOUR);
  });

  test('of readings sent on change, with no beat beneath, is the median', () => {
    const random = seededNumbers(9);
    const intervals = Array.from({ length: 4001 }, () => 1000 + Math.floor(90_000 * random()));
    let time = 0;
    const found = cadenceOf(readAt(intervals.map((interval) => (time += interval))), null).intervalMs;
    const sorted = intervals.slice(1).sort((a, b) => a - b);
    expect(Math.abs(found - (sorted[1999]! + sorted[2000]!) / 2)).toBeLessThan(100);
  });
});
