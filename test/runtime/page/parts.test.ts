/** The page's small parts: what is kept of the past and of earlier forecasts, how late the loop was, the line's state. */

import { createHash } from 'node:crypto';
import { expect, test } from 'vitest';
import { RecentTicks } from '../../../runtime/ingest/recent.ts';
import { pageDocument } from '../../../runtime/page/document.ts';
import { decimalsShown } from '../../../runtime/page/facts.ts';
import { Link } from '../../../runtime/page/link.ts';
import { LoopDelay } from '../../../runtime/page/loop-delay.ts';
import { pastReadings, roundTo } from '../../../runtime/page/past.ts';
import { SaidBefore, stepsKept } from '../../../runtime/page/said-before.ts';
import type { Serving } from '../../../runtime/serving.ts';

function ticksOf(count: number, value: (tick: number) => number, firstTick = 1000): RecentTicks {
  const recent = new RecentTicks(1, 8192);
  for (let n = 0; n < count; n++) recent.push(firstTick + n, Float64Array.of(value(firstTick + n)));
  return recent;
}

test('past readings: a few are told one by one, the newest last, missing ones as null', () => {
  const recent = ticksOf(10, (tick) => (tick === 1004 ? Number.NaN : tick / 3));
  const { ticks, values } = pastReadings(recent, 6, 1, [2]);
  expect(ticks).toEqual([1004, 1005, 1006, 1007, 1008, 1009]);
  expect(values[0]).toEqual([null, 335, 335.333, 335.667, 336, 336.333]);
  expect(pastReadings(recent, 0, 1, [2]).ticks).toEqual([]);
  expect(pastReadings(new RecentTicks(2, 8), 6, 2, [2, 2])).toEqual({ ticks: [], values: [[], []] });
});

test('past readings: of many, a spike of one tick is among those told', () => {
  for (const at of [1500, 2717, 3999]) {
    const recent = ticksOf(3072, (tick) => (tick === at ? 99 : 1));
    const { ticks, values } = pastReadings(recent, 3072, 1, [0]);
    expect(ticks.length).toBeLessThanOrEqual(481);
    expect(values[0]!.filter((value) => value === 99)).toHaveLength(1);
    expect(Math.abs(ticks[values[0]!.indexOf(99)]! - at)).toBeLessThanOrEqual(4);
  }
});

test('past readings: points stand where they stood when a tick is added', () => {
  const before = pastReadings(
    ticksOf(3000, (tick) => tick % 7),
    2000,
    1,
    [0],
  );
  const after = pastReadings(
    ticksOf(3001, (tick) => tick % 7),
    2000,
    1,
    [0],
  );
  const inner = before.ticks.slice(2, -2);
  expect(after.ticks).toEqual(expect.arrayContaining(inner));
});

/** Only what is read of a serving bundle. */
function servingAt(tick: number, horizon: number, sequence = 1): Serving {
  const path = (offset: number) => Float64Array.from({ length: 2 * horizon }, (_, k) => tick + k + offset);
  return {
    tick,
    model: { horizon, signalCount: 2 },
    checked: { sequence },
    median: path(0),
    lower: path(-1),
    upper: path(1),
    computeBounds() {},
  } as unknown as Serving;
}

test('earlier forecasts: one a horizon, end to end, as they were said; old ones go', () => {
  const said = new SaidBefore();
  for (let tick = 100; tick < 400; tick++) said.take(servingAt(tick, 24));
  expect(said.kept.map(({ tick }) => tick)).toEqual([316, 340, 364, 388]);
  const [first] = said.kept;
  expect(first!.steps).toEqual(Array.from({ length: 24 }, (_, h) => h + 1));
  expect([...first!.median.subarray(24, 26), first!.lower[0], first!.upper[0]]).toEqual([340, 341, 315, 317]);
  // After a break the next forecast begins where it begins.
  said.take(servingAt(1000, 24));
  expect(said.kept.map(({ tick }) => tick)).toEqual([1000]);
  // A clock set back: what was said of another time goes.
  said.take(servingAt(500, 24));
  expect(said.kept.map(({ tick }) => tick)).toEqual([500]);
});

test('earlier forecasts: of a long horizon some steps, the last among them', () => {
  for (const horizon of [1, 2, 96, 97, 100, 192, 193, 1000, 1024]) {
    const steps = stepsKept(horizon);
    expect(steps.at(-1)).toBe(horizon);
    expect(steps.length).toBeLessThanOrEqual(97);
    for (let k = 1; k < steps.length; k++) expect(steps[k]!).toBeGreaterThan(steps[k - 1]!);
  }
});

test('loop delay: count, sum, and the largest of the last minute', () => {
  const delay = new LoopDelay();
  expect(delay.largestMs(0)).toBe(0);
  delay.pulse(3, 1000);
  delay.pulse(250, 2000);
  delay.pulse(-1, 3000);
  expect([delay.count, delay.sumMs]).toEqual([3, 253]);
  expect(delay.largestMs(59_000)).toBe(250);
  expect(delay.largestMs(60_000)).toBe(0);
  delay.pulse(7, 61_000);
  expect(delay.largestMs(61_000)).toBe(7);
});

test('link: how long it has been so, and why it was lost', () => {
  const link = new Link(0);
  expect(link.facts(1000)).toEqual({ connected: false, for_s: 1, protocol: null, reason: null });
  link.take({ kind: 'lost', reason: 'nothing listens there', retryMs: 10 }, 1500);
  expect(link.facts(2000)).toMatchObject({ connected: false, for_s: 2, reason: 'nothing listens there' });
  link.take({ kind: 'connected', protocol: 5, sessionPresent: false }, 3000);
  expect(link.facts(5000)).toMatchObject({ connected: true, for_s: 2, protocol: '5' });
  link.take({ kind: 'lost', reason: 'cut', retryMs: 10 }, 6000);
  link.take({ kind: 'lost', reason: 'cut again', retryMs: 10 }, 8000);
  expect(link.facts(9000)).toMatchObject({ connected: false, for_s: 3, reason: 'cut again' });
});

test('decimals of a sensor, and rounding to one more', () => {
  expect([1, 0.5, 0.1, 0.25, 0.005, 10, 1e-9, null, 0.1 + 0.2].map(decimalsShown)).toEqual([
    0,
    1,
    1,
    2,
    3,
    0,
    6,
    null,
    1,
  ]);
  expect([roundTo(1.23456, 2), roundTo(-1.23456, 0), roundTo(123456.789, null), roundTo(1e300, 6)]).toEqual([
    ...[1.235, -1.2, 123456.8],
    1e300,
  ]);
});

test('the document: one file, nothing from elsewhere, and a policy that names exactly its script and style', () => {
  const { html, policy } = pageDocument();
  const text = Buffer.from(html).toString();
  const digest = (inside: string) => `'sha256-${createHash('sha256').update(inside).digest('base64')}'`;
  const script = /<script>([\s\S]*)<\/script>/.exec(text)![1]!;
  const style = /<style>([\s\S]*?)<\/style>/.exec(text)![1]!;
  expect(policy).toContain(`script-src ${digest(script)};`);
  expect(policy).toContain(`style-src ${digest(style)};`);
  expect(policy).not.toMatch(/unsafe|\*/);
  expect(text.replace(/http:\/\/www\.w3\.org\/2000\/svg|http%3A%2F%2Fwww\.w3\.org%2F2000%2Fsvg/g, '')).not.toMatch(
    /https?:|\/\/[a-z]/,
  );
  expect(text).not.toMatch(/ on[a-z]+="| style="/);
  expect(text).toContain('Advisory estimate. Not a safety function');
});
