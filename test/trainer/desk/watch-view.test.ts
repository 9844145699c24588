/** What a person sees: values, bounds, plots, ages; a forecast past its time never looks like one. */
import {
  ADVISORY,
  forecastMessage,
  parseForecastMessage,
  parseStateMessage,
  stateMessage,
  topicsOf,
} from '@stillwell/protocol';
import { openConnection } from '@stillwell/runtime/mqtt';
import { describe, expect, onTestFinished, test } from 'vitest';
import { bandPlot } from '../../../trainer/desk/band-plot.ts';
import { followSite } from '../../../trainer/desk/watch.ts';
import { newestTickEndMs, screenText, viewLine, viewOf } from '../../../trainer/desk/watch-view.ts';
import { startAedes } from '../../support/broker.ts';
import { until } from '../../support/until.ts';

const ORIGIN = Date.UTC(2026, 4, 1, 12);
const head = {
  site: 'pump-7',
  gateway: 'gw-1',
  bundle: new Uint8Array(32).fill(7),
  sequence: 3,
  issuedAtMs: ORIGIN + 60_000,
  validUntilMs: ORIGIN + 600_000,
  quality: 'M' as const,
  qualityReason: 'drift',
};
const steps = Array.from({ length: 24 }, (_, h) => 10 + h / 2);
const forecast = parseForecastMessage(
  forecastMessage({
    ...head,
    signal: 'level',
    unit: 'm',
    originMs: ORIGIN,
    tickMs: 60_000,
    coverage: 0.9,
    median: steps,
    lower: steps.map((value, h) => value - 1 - h / 10),
    upper: steps.map((value, h) => value + 1 + h / 10),
    limits: [
      { limit: 'high', value: 15, probability: 0.62, timeMs: ORIGIN + 10 * 60_000 },
      { limit: 'high_high', value: 40, probability: 0.001, timeMs: null },
    ],
    inputs: 'held',
    lastReadingMs: ORIGIN + 30_000,
  }),
);
const state = parseStateMessage(
  stateMessage({ ...head, originMs: ORIGIN, tickMs: 60_000, filtered: { level: 9.75 }, state: [0.5], missing: [] }),
);
const site = { site: 'pump-7', forecasts: new Map([['level', forecast]]), state, health: null };

describe('a forecast within its time', () => {
  const now = ORIGIN + 90_000;

  test('shows the value now, steps with bounds, quality and the limit that will probably be crossed', () => {
    const view = viewOf(forecast, state, now);
    expect(view).toMatchObject({ now: 9.75, isStale: false, ageMs: 60_000, quality: 'M' });
    expect(view.steps.map((one) => one.step)).toEqual([1, 6, 12, 24]);
    const line = viewLine(view);
    expect(line).toContain('level 9.75 m  +1 min 10 [9 .. 11]');
    expect(line).toContain('quality M (drift)');
    expect(line).toContain('high 15: 62 %, probably in 10 min');
    expect(line).not.toContain('high-high');
  });

  test('the screen fits the terminal and always ends in the advisory', () => {
    const screen = screenText(site, ['level'], now, 24, 80).split('\n');
    expect(screen.length).toBeLessThanOrEqual(24);
    expect(Math.max(...screen.map((line) => line.length))).toBeLessThanOrEqual(120);
    expect(screen.slice(-4).join(' ')).toContain(ADVISORY.slice(-60));
    expect(screen.join('\n')).toMatch(/[░▁▂▃▄▅▆▇█]/);
  });
});

describe('the present of a replay', () => {
  test('is the end of the newest tick heard, so that a replayed forecast is not stale', () => {
    expect(newestTickEndMs(site)).toBe(ORIGIN + 60_000);
    expect(newestTickEndMs({ ...site, forecasts: new Map(), state: null })).toBe(0);
    expect(viewOf(forecast, state, newestTickEndMs(site)).isStale).toBe(false);
  });
});

describe('a forecast past its time', () => {
  const late = ORIGIN + 600_001;

  test('is stale, with no step and no plot', () => {
    const view = viewOf(forecast, state, late);
    expect(view.isStale).toBe(true);
    expect(viewLine(view)).toContain('STALE: not valid after 2026-05-01T12:10:00');
    expect(viewLine(view)).not.toContain('[9 .. 11]');
    const screen = screenText(site, ['level'], late, 24, 80);
    expect(screen).toContain('STALE');
    expect(screen).not.toMatch(/[░▁▂▃▄▅▆▇█]/);
  });

  test('one moment earlier it is not', () => {
    expect(viewOf(forecast, state, late - 1).isStale).toBe(false);
  });
});

describe('the plot', () => {
  test('rises with the median, inside the band', () => {
    const plot = bandPlot({ median: [1, 2, 3], lower: [0, 1, 2], upper: [2, 3, 4] }, 3, 4);
    const rowOf = (column: number): number => plot.findIndex((row) => '▁▂▃▄▅▆▇█'.includes(row[column]!));
    expect([rowOf(0), rowOf(1), rowOf(2)]).toEqual([2, 1, 0]);
    expect(plot[3]![0]).toBe('░');
    expect(plot[0]![0]).toBe(' ');
  });

  test('a flat forecast of no width is one line in the middle; one row is enough', () => {
    const flat = bandPlot({ median: [5, 5], lower: [5, 5], upper: [5, 5] }, 10, 3);
    expect(flat.map((row) => row.trim().length)).toEqual([0, 2, 0]);
    expect(bandPlot({ median: [1, 9], lower: [1, 9], upper: [1, 9] }, 10, 1)).toHaveLength(1);
  });
});

test('text of a message cannot redraw the terminal', () => {
  const hostile = { ...forecast, unit: 'm\u001b[2J', quality_reason: 'drift\u009b1A\n' };
  const text = viewLine(viewOf(hostile, state, ORIGIN + 90_000));
  expect(text).not.toMatch(/\p{Cc}/u);
  expect(text).toContain('m?[2J');
});

test('a forecast under the topic of another site or signal is passed over and told, not shown', async () => {
  const broker = await startAedes();
  onTestFinished(() => broker.stop());
  const shown: (string | null)[] = [];
  const troubles: string[] = [];
  const following = await followSite({
    broker: broker.url,
    root: 'stillwell',
    site: 'pump-7',
    onChange: (_, signal) => shown.push(signal),
    onTrouble: (text) => troubles.push(text),
  });
  onTestFinished(() => following.stop());
  const sender = openConnection({ url: broker.url, clientId: 'sender', protocol: 4, onMessage: () => {} });
  onTestFinished(() => sender.end());
  await sender.firstConnect(5000);
  const send = (signal: string, message: object) =>
    sender.publish({
      topic: topicsOf('stillwell', 'pump-7').forecast(signal),
      payload: Buffer.from(JSON.stringify(message)),
      qos: 1,
      retain: false,
    });
  await send('level', { ...forecast, site: 'pump-8' });
  await send('flow', forecast);
  await send('level', forecast);
  await until('the honest forecast is shown', () => shown.length > 0);
  expect(shown).toEqual(['level']);
  expect(troubles).toEqual([
    expect.stringContaining('expected a message of site "pump-7", got one of "pump-8"'),
    expect.stringContaining('expected a forecast of signal "flow", got one of "level"'),
  ]);
});
