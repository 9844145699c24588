/** The browser's side without a browser: words, grids, paths, and what is put together of what is heard. */
import { spawnSync } from 'node:child_process';
import { fileURLToPath } from 'node:url';
import { expect, test } from 'vitest';
import { type Frame, rangeOf, readingsPath, thinned, tickAt, xOf, yOf } from '../../../runtime/page/client/geometry.ts';
import { needsLook, outlookOf } from '../../../runtime/page/client/outlook.ts';
import { Plant } from '../../../runtime/page/client/plant.ts';
import { timeScale, valueScale } from '../../../runtime/page/client/scale.ts';
import * as words from '../../../runtime/page/client/words.ts';
import { Zone } from '../../../runtime/page/client/zone.ts';
import type { News, Snapshot } from '../../../runtime/page/told.ts';

const plain = (text: string): string => text.replaceAll('\u00a0', ' ').replaceAll('\u2212', '-');

test('the text that is served was built from these sources', () => {
  const build = fileURLToPath(new URL('../../../runtime/page/build.js', import.meta.url));
  expect(spawnSync(process.execPath, [build, '--check']).status).toBe(0);
});

test('spans in their two largest units', () => {
  const texts = [0.02, 1, 89, 90, 5399, 5400, 7199, 86_400, 172_799, 172_800, 2e6, Number.NaN].map(words.spanText);
  expect(texts.map(plain)).toEqual([
    ...['20 ms', '1 s', '89 s', '2 min', '90 min', '1 h 30 min', '2 h', '24 h', '48 h', '2 d', '23 d 4 h', '–'],
  ]);
});

test('numbers, units, chances, bytes', () => {
  expect(
    [
      words.numberText(-1.005, 1),
      words.numberText(3, 2),
      words.numberText(0.00012346, null),
      words.numberText(null, 2),
    ].map(plain),
  ).toEqual([...['-1.0', '3.00', '0.0001235', '–']]);
  expect(['1', 'Cel', 'm3/h', 'L/s', 'kg/m2', 'W/m2', 'mm'].map(words.unitText)).toEqual([
    '',
    '°C',
    'm³/h',
    'L/s',
    'kg/m²',
    'W/m²',
    'mm',
  ]);
  expect([0, 0.005, 0.01, 0.5, 0.99, 0.995, 1].map(words.chanceText).map(plain)).toEqual([
    ...['below 1 %', 'below 1 %', '1 %', '50 %', '99 %', 'above 99 %', 'above 99 %'],
  ]);
  expect([12, 1500, 18_452, 33_554_432, 2e9].map(words.bytesText).map(plain)).toEqual([
    '12 B',
    '1.5 kB',
    '18 kB',
    '34 MB',
    '2.0 GB',
  ]);
  expect(words.withoutName('level: no reading for 3 ticks or more', 'level')).toBe('No reading for 3 ticks or more');
});

test('a grid of values: at least three round lines inside any range', () => {
  for (const [low, high] of [
    [0, 1],
    [5.1, 14.7],
    [-3, 7.3],
    [1e6, 1e6 + 3],
    [0.001, 0.0017],
    [99, 101],
    [-5, -4.9],
    [0, 9.99],
  ]) {
    const { lines, decimals } = valueScale(low!, high!, 1e-6);
    expect(lines.length, `${low} ${high}`).toBeGreaterThanOrEqual(3);
    expect(lines.length).toBeLessThanOrEqual(11);
    for (const line of lines) {
      expect(line).toBeGreaterThanOrEqual(low! - 1e-9 * Math.abs(low!));
      expect(line).toBeLessThanOrEqual(high! + 1e-9 * Math.abs(high!));
      expect(Math.abs(line - Number(line.toFixed(decimals)))).toBeLessThan(1e-9 * Math.max(1, Math.abs(line)));
    }
  }
  const flat = valueScale(4, 4, 0.08);
  expect([flat.low, flat.high]).toEqual([3.96, 4.04]);
});

test('a grid of times: round by the zone’s clock, no more than asked for', () => {
  const zone = new Zone('Asia/Kathmandu');
  const from = Date.UTC(2026, 2, 1, 3, 7);
  // IANA time zone database: Nepal is 5 h 45 min ahead of UTC.
  expect(zone.offsetMs(from)).toBe((5 * 60 + 45) * 60_000);
  const { lines, stepMs } = timeScale(from, from + 6 * 3_600_000, 5, zone.offsetMs(from));
  expect(stepMs).toBe(2 * 3_600_000);
  expect(lines.map((ms) => zone.clock(ms))).toEqual(['10:00', '12:00', '14:00']);
  expect(new Zone('Nowhere/Atall').name).toBe('UTC');
  expect(zone.near(from, from + 30 * 3_600_000)).toBe('1 Mar 08:52');
});

const frame: Frame = {
  left: 0,
  right: 100,
  top: 0,
  bottom: 50,
  fromTick: 0,
  toTick: 100,
  values: valueScale(0, 10, 1),
};

test('readings: joined where they follow as usual, broken at gaps, dots where they stand alone', () => {
  expect(readingsPath(frame, [0, 1, 2, 10, 11, 20], [1, 2, 3, 4, 5, 6])).toBe('M0 45L1 40L2 35M10 30L11 25M20 20h0');
  expect(readingsPath(frame, [0, 5, 10, 15], [1, 2, 3, 4])).toBe('M0 45L5 40L10 35L15 30');
  expect(readingsPath(frame, [7], [5])).toBe('M7 25h0');
  expect(readingsPath(frame, [1, 2], [null, null])).toBe('');
  expect([xOf(frame, 50), yOf(frame, 10), tickAt(frame, 25)]).toEqual([50, 0, 25]);
});

test('range: holds readings and bounds, and a limit only where that does not squeeze them', () => {
  const path = [{ tick: 1, median: 5, lower: 4, upper: 8 }];
  const near = rangeOf([2, 3, null], [path], [9], 0.1);
  expect([near.low < 2, near.high > 9]).toEqual([true, true]);
  const far = rangeOf([2, 3, null], [path], [90], 0.1);
  expect(far.high).toBeLessThan(9);
  expect(rangeOf([null], [], [90], 0.1)).toMatchObject({ low: 0, high: 1 });
  const long = Array.from({ length: 1000 }, (_, tick) => ({ tick, median: 0, lower: 0, upper: 0 }));
  expect(thinned(long, 240).at(-1)!.tick).toBe(999);
  expect(thinned(long, 240).length).toBeLessThanOrEqual(241);
});

const TICK_MS = 60_000;

function newsOf(ticks: readonly number[], extra: Partial<News> = {}): News {
  const origin = ticks.at(-1) ?? 0;
  const forecast = {
    signal: 'level',
    origin: new Date(origin * TICK_MS).toISOString(),
    valid_until: new Date((origin + 5) * TICK_MS).toISOString(),
    median: [1, 2, 3],
    lower: [0, 1, 2],
    upper: [2, 3, 4],
    coverage: 0.9,
    limits: [{ limit: 'high', value: 5, probability: 0.2, time: null }],
  };
  return {
    at: (origin + 1) * TICK_MS,
    health: { status: 'running' } as News['health'],
    facts: {
      clock_set: true,
      signals: [{ signal: 'level', quality: null, reason: null, last_ms: 0 }],
      warnings: [],
    } as unknown as News['facts'],
    forecasts: [forecast] as unknown as News['forecasts'],
    came: { ticks, values: [ticks.map((tick) => tick / 10)] },
    said: [],
    ...extra,
  };
}

function plantOf(ticks: readonly number[], clock = 'wall', extra: Partial<News> = {}): Plant {
  const none = { highHigh: null, high: 5, low: null, lowLow: null };
  const site = {
    tick_ms: TICK_MS,
    horizon: 3,
    clock,
    signals: [{ name: 'level', unit: 'm', decimals: 1, limits: none }],
    inputs: [],
  };
  return new Plant({ ...newsOf(ticks, extra), page: 'x', site } as unknown as Snapshot, 1000);
}

test('what is heard twice counts once, and what is older than the chart goes', () => {
  const plant = plantOf([100, 101, 102]);
  plant.news(newsOf([102, 103, 104]), 2000);
  expect(plant.ticks).toEqual([100, 101, 102, 103, 104]);
  expect(plant.values(0)).toEqual([10, 10.1, 10.2, 10.3, 10.4]);
  plant.news(newsOf([110, 111]), 3000);
  expect(plant.ticks).toEqual([102, 103, 104, 110, 111]);
  expect(plant.ahead(0).map(({ tick }) => tick)).toEqual([112, 113, 114]);
});

test('time runs on between words by the wall, and stands still where readings are the clock', () => {
  expect(plantOf([100]).now(61_000)).toBe(102 * TICK_MS);
  expect(plantOf([100], 'readings').now(61_000)).toBe(101 * TICK_MS);
  expect(plantOf([100]).silence(61_000)).toBe(60);
  expect(plantOf([100], 'wall', { at: null }).now(5000)).toBeNull();
});

test('earlier forecasts end where the next begins, and tell how the bounds held', () => {
  const row = (values: number[]) => [values];
  const said = [
    {
      tick: 99,
      sequence: 1,
      steps: [1, 2, 3],
      median: row([10, 10, 10]),
      lower: row([9, 10.15, 9]),
      upper: row([11, 11, 11]),
    },
    {
      tick: 101,
      sequence: 1,
      steps: [1, 2, 3],
      median: row([10, 10, 10]),
      lower: row([9, 9, 9]),
      upper: row([11, 11, 11]),
    },
  ];
  const plant = plantOf([98, 99, 100, 101, 102], 'wall', { said });
  expect(plant.saidBefore(0).map((path) => path.map(({ tick }) => tick))).toEqual([[100, 101], [102]]);
  // 10.0 and 10.2 inside; 10.1 below the bound of its step.
  expect(plant.kept(0)).toEqual({ inside: 2, of: 3 });
});

test('an outlook: good, with a letter, expired, or with a limit that is likely', () => {
  const good = outlookOf(plantOf([100]), 0, 101 * TICK_MS);
  expect([good, needsLook(good)]).toEqual([{ letter: null, reason: null, limit: null }, false]);
  const expired = outlookOf(plantOf([100]), 0, 106 * TICK_MS);
  expect(expired.reason).toMatch(/^The forecast has expired/);
  const plant = plantOf([100]);
  plant.pulse(
    {
      ...newsOf([100]),
      facts: { ...plant.facts, signals: [{ signal: 'level', quality: 'M', reason: 'level: it hangs', last_ms: 0 }] },
    },
    2000,
  );
  expect(outlookOf(plant, 0, 101 * TICK_MS)).toEqual({ letter: 'M', reason: 'It hangs', limit: null });
  const times = { since_ms: 0, earliest_ms: null, likely_ms: null, latest_ms: null, crossed_ms: null };
  const warnings = [0.6, 0.8].map((probability, k) => ({
    signal: 'level',
    limit: k === 0 ? 'high_high' : 'high',
    value: 5,
    probability,
    ...times,
  }));
  const likely = plantOf([100]);
  likely.pulse({ ...newsOf([100]), facts: { ...likely.facts, warnings } }, 2000);
  expect(outlookOf(likely, 0, 101 * TICK_MS).limit).toMatchObject({ limit: 'high', probability: 0.8 });
});
