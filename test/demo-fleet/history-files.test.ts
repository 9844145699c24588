import { mkdtempSync, readFileSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { type LogHabit, type Scans, writeHistory } from '../../demo-fleet/history-files.ts';
import { DEMO_SITES } from '../../demo-fleet/plants/sites.ts';

const site = DEMO_SITES[3];
const START = Date.UTC(2025, 3, 7);
const scans: Scans = {
  timesMs: Array.from({ length: 2000 }, (_, k) => START + k * 120_000 + 119_000),
  rows: Array.from({ length: 2000 }, (_, k) => Float64Array.of(2 + k / 1000, -5, 3, k === 7 ? Number.NaN : 11)),
};
let folder = '';

beforeAll(() => {
  folder = mkdtempSync(join(tmpdir(), 'stillwell-test-'));
});
afterAll(() => rmSync(folder, { recursive: true, force: true }));

const lines = (habit: LogHabit): string[][] =>
  writeHistory(folder, site, habit, scans, 1).map((path) => readFileSync(path, 'utf8').trim().split('\n'));

describe('history files', () => {
  it('hold what was said at the time it was said, with a few rows twice and a gap', () => {
    const files = lines('wide-utc');
    expect(files.length).toBe(2);
    const rows = files.flatMap((file) => file.slice(1));
    expect(files[0][0]).toBe('time,room,suction,power,outdoor');
    expect(new Set(rows).size).toBeLessThan(rows.length);
    expect(new Set(rows).size).toBeLessThan(2000);
    for (const row of new Set(rows)) {
      const [time, room] = row.split(',');
      const k = (Date.parse(time) - START - 119_000) / 120_000;
      expect(Number.isInteger(k)).toBe(true);
      if (room !== '') expect(Number(room)).toBe(scans.rows[k][0]);
    }
  });

  it('are out of order in places', () => {
    const times = lines('wide-utc')[0]
      .slice(1)
      .map((row) => Date.parse(row.split(',')[0]));
    expect(times.some((time, i) => i > 0 && time < times[i - 1])).toBe(true);
  });

  it('hold local time without a zone under the engineer’s own headings', () => {
    const [file] = lines('wide-local');
    expect(file[0]).toBe('time;ROOM [Cel];SUCTION [Cel];POWER [kW];OUTDOOR [Cel]');
    expect(file[1]).toMatch(/^2025-04-07 01:01:59;/);
  });

  it('hold one reading a line where the logger speaks point by point', () => {
    const [file] = lines('long');
    expect(file[0]).toBe('time,signal,value');
    expect(file[1]).toMatch(/^2025-04-07T00:01:59Z,room,2$/);
    expect(file.some((line) => line.endsWith('NaN'))).toBe(false);
  });
});
