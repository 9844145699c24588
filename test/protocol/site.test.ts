/** Reading site files: what a good one gives. */
import { describe, expect, test } from 'vitest';
import { AS_SENT, documentPayload, parseSite } from '../../protocol/site.ts';
import { refusalOf } from '../support/refusal.ts';
import { edited, GOOD } from '../support/site-text.ts';

describe('a good site file', () => {
  test('gives every value in our units, defaults filled in', () => {
    const site = parseSite(GOOD);
    expect(site).toEqual({
      site: 'mill-lane',
      equipmentClass: 'wet-well',
      timeZone: 'Europe/Vienna',
      tickMs: 60_000,
      horizon: 120,
      latenessMs: 5000,
      root: 'stillwell',
      residualBytesPerDay: 100_000,
      warn: { open: 0.5, close: 0.3, hold: 10 },
      signals: [
        {
          name: 'level',
          topic: 'plant/well/level',
          payload: documentPayload('json', '/value', '/ts'),
          unit: 'm',
          ...AS_SENT,
          resolution: 0.01,
          range: [0, 6],
          aggregate: 'last',
          limits: { highHigh: 5.5, high: 5, low: 0.5, lowLow: 0.25 },
          warn: null,
          column: 'Level (m)',
        },
        {
          name: 'inflow',
          topic: null,
          payload: { kind: 'number' },
          unit: '1',
          ...AS_SENT,
          resolution: null,
          range: null,
          aggregate: 'mean',
          limits: { highHigh: null, high: null, low: null, lowLow: null },
          warn: null,
          column: 'inflow',
        },
      ],
      inputs: [
        {
          name: 'rain',
          topic: 'weather/+/rain',
          payload: { kind: 'number' },
          unit: 'mm/h',
          ...AS_SENT,
          resolution: null,
          range: null,
          aggregate: 'sum',
          limits: { highHigh: null, high: null, low: null, lowLow: null },
          warn: null,
          column: 'rain',
          planTopic: 'weather/plan/rain',
        },
      ],
      calendar: { timeOfDay: true, dayOfWeek: true, holidays: ['2026-12-25'] },
      exclude: [],
    });
    expect(Object.isFrozen(site.signals[0]!.limits)).toBe(true);
  });

  test.each([
    ['horizon in ticks', 'horizon: 2h', 'horizon: 48', (s: ReturnType<typeof parseSite>) => s.horizon, 48],
    [
      'lateness left out: a tenth of a tick',
      'lateness: 5s\n',
      '',
      (s: ReturnType<typeof parseSite>) => s.latenessMs,
      6000,
    ],
    [
      'a tick in fractions',
      'tick: 1min\nhorizon: 2h',
      'tick: 0.1min\nhorizon: 1h',
      (s: ReturnType<typeof parseSite>) => s.tickMs,
      6000,
    ],
    [
      'a root of two levels',
      'tick: 1min',
      'tick: 1min\nroot: plant/ours',
      (s: ReturnType<typeof parseSite>) => s.root,
      'plant/ours',
    ],
    ['unit 1 as a number', 'unit: m\n', 'unit: 1\n', (s: ReturnType<typeof parseSite>) => s.signals[0]!.unit, '1'],
    [
      'null for nothing',
      'resolution: 0.01',
      'resolution: null',
      (s: ReturnType<typeof parseSite>) => s.signals[0]!.resolution,
      null,
    ],
    [
      'the whole payload',
      'json: /value',
      'json: ""',
      (s: ReturnType<typeof parseSite>) => s.signals[0]!.payload,
      documentPayload('json', '', '/ts'),
    ],
    [
      'MessagePack',
      'json: /value',
      'msgpack: /value',
      (s: ReturnType<typeof parseSite>) => s.signals[0]!.payload.kind,
      'msgpack',
    ],
    [
      'letters of any script',
      'name: inflow',
      'name: Zufluß',
      (s: ReturnType<typeof parseSite>) => s.signals[1]!.name,
      'Zufluß',
    ],
  ] as const)('%s', (_, from, to, read, value) => expect(read(parseSite(edited(from, to)))).toEqual(value));

  test('lateness left out stays within ten seconds', () => {
    const text = edited('lateness: 5s\n', '').replace('tick: 1min', 'tick: 1h').replace('horizon: 2h', 'horizon: 24h');
    expect(parseSite(text).latenessMs).toBe(10_000);
  });

  test('line ends of another system and a byte order mark change nothing', () => {
    expect(parseSite(`\ufeff${GOOD.replaceAll('\n', '\r\n')}`)).toEqual(parseSite(GOOD));
    const broken = edited('tick: 1min', 'tick: soon').replaceAll('\n', '\r\n');
    expect(refusalOf(() => parseSite(broken, 'site.yaml')).message).toContain('site.yaml:5:7: tick: ');
  });

  test('anchors may spare repetition', () => {
    const text = edited('payload: {json: /value, time: /ts}', 'payload: &p {json: /value, time: /ts}').replace(
      'payload: number',
      'payload: *p',
    );
    expect(parseSite(text).inputs[0]!.payload).toEqual(documentPayload('json', '/value', '/ts'));
  });
});
