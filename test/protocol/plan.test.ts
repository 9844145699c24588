import { Packr } from 'msgpackr';
import { describe, expect, test } from 'vitest';
import { type PlanRules, parsePlan } from '../../protocol/plan.ts';
import { refusalOf } from '../support/refusal.ts';

const NOW = Date.UTC(2026, 2, 1, 12);
const MINUTE = 60_000;
const rules: PlanRules = { tickMs: MINUTE, horizon: 60, range: [0, 10], nowMs: NOW };
const json = (value: unknown): Uint8Array => new TextEncoder().encode(JSON.stringify(value));
const text = (content: string): Uint8Array => new TextEncoder().encode(content);
const packr = new Packr({ useRecords: false });
const at = (minutes: number): string => new Date(NOW + minutes * MINUTE).toISOString();

describe('a plan', () => {
  const wanted = { timesMs: [NOW, NOW + 900_000], values: [1, 2], endMs: NOW + 1_800_000, issuedAtMs: null };
  test.each<[string, Uint8Array, object]>([
    ['start, step as duration, values', json({ start: at(0), step: '15min', values: [1, 2] }), wanted],
    ['step in seconds, start in ms', json({ start: NOW, step: 900, values: [1, 2] }), wanted],
    ['the same in MessagePack', packr.pack({ start: NOW, step: '15min', values: [1, 2] }), wanted],
    ['a zone', json({ start: '2026-03-01T13:00:00+01:00', step: '15min', values: [1, 2] }), wanted],
    [
      'points, the last for one tick',
      json({
        points: [
          { time: at(5), value: true },
          { time: at(9), value: false },
        ],
      }),
      { timesMs: [NOW + 5 * MINUTE, NOW + 9 * MINUTE], values: [1, 0], endMs: NOW + 10 * MINUTE, issuedAtMs: null },
    ],
    [
      'a bare list of points',
      json([{ time: NOW, value: 3 }]),
      { timesMs: [NOW], values: [3], endMs: NOW + MINUTE, issuedAtMs: null },
    ],
    [
      'a bare list in MessagePack',
      packr.pack([{ time: NOW, value: 3 }]),
      { timesMs: [NOW], values: [3], endMs: NOW + MINUTE, issuedAtMs: null },
    ],
    [
      'an end and the time it was made',
      json({ points: [{ time: at(-5), value: 3 }], end: at(60), issued_at: at(-6) }),
      { timesMs: [NOW - 5 * MINUTE], values: [3], endMs: NOW + 60 * MINUTE, issuedAtMs: NOW - 6 * MINUTE },
    ],
    [
      'JSON behind a byte order mark',
      Uint8Array.of(0xef, 0xbb, 0xbf, ...json([{ time: NOW, value: 3 }])),
      { timesMs: [NOW], values: [3], endMs: NOW + MINUTE, issuedAtMs: null },
    ],
  ])('%s', (_, payload, expected) => expect(parsePlan(payload, rules)).toEqual(expected));

  test('of 4096 values is the longest', () => {
    const values = Array.from({ length: 4096 }, () => 1);
    expect(parsePlan(json({ start: at(0), step: 1, values }), rules).values).toHaveLength(4096);
    const more = refusalOf(() => parsePlan(json({ start: at(0), step: 1, values: [...values, 1] }), rules));
    expect(more.message).toBe('plan: values: expected at most 4096, got 4097');
    expect(more.details.reason).toBe('long');
  });

  test('is never too far off where the time is not known', () => {
    const far = json({ start: '2031-01-01T00:00:00Z', step: '1h', values: [1] });
    expect(parsePlan(far, { ...rules, nowMs: null }).values).toEqual([1]);
    expect(refusalOf(() => parsePlan(far, rules)).details.reason).toBe('far');
  });

  test('may start as far ahead as a long horizon reaches', () => {
    const far = json({ start: at(60 * 24 * 40), step: '1d', values: [1] });
    expect(refusalOf(() => parsePlan(far, rules)).details.reason).toBe('far');
    expect(parsePlan(far, { ...rules, tickMs: 1440 * MINUTE }).values).toEqual([1]);
  });
});

describe('refusals', () => {
  test.each<[string, Uint8Array, string, string]>([
    ['no bytes', text(''), 'syntax', 'expected JSON or MessagePack, got no bytes'],
    ['a word', text('soon'), 'syntax', 'expected JSON or MessagePack, got "soon"'],
    ['broken MessagePack', Uint8Array.of(0x81, 0xa1), 'syntax', 'expected plain MessagePack'],
    ['broken UTF-8', Uint8Array.of(0x7b, 0xff), 'syntax', 'got malformed bytes'],
    ['a number', json(7), 'fields', 'expected a map, got 7'],
    ['null', json(null), 'fields', 'expected a map, got null'],
    [
      'nothing of it',
      json({}),
      'fields',
      'expected points, or start, step and values, got no start and no step and no values',
    ],
    ['no step', json({ start: at(0), values: [1] }), 'fields', 'got no step'],
    ['both forms', json({ step: 1, points: [{ time: at(0), value: 1 }] }), 'fields', 'got points and step'],
    [
      'an unknown key',
      json({ start: at(0), stp: 1, values: [1] }),
      'fields',
      'stp is not a known key; did you mean "step"?',
    ],
    ['no values', json({ start: at(0), step: 1, values: [] }), 'fields', 'values: expected at least 1 entries'],
    [
      'a null value',
      json({ start: at(0), step: 1, values: [1, null] }),
      'fields',
      'values[1]: expected a number, true or false, got null',
    ],
    [
      'text for a value',
      json([{ time: at(0), value: 'on' }]),
      'fields',
      'points[0].value: expected a number, true or false, got "on"',
    ],
    ['no value', json([{ time: at(0) }]), 'fields', 'points[0].value: expected a number, true or false, got nothing'],
    ['an infinite value', text(`{"start": ${NOW}, "step": 1, "values": [1e999]}`), 'fields', 'got Infinity'],
    [
      'a time without zone',
      json({ start: '2026-03-01T12:00:00', step: 1, values: [1] }),
      'fields',
      'start: expected a time such as',
    ],
    [
      'seconds since 1970',
      json({ start: NOW / 1000, step: 1, values: [1] }),
      'fields',
      'seconds since 1970? write milliseconds',
    ],
    [
      'a step of nothing',
      json({ start: at(0), step: 0, values: [1] }),
      'fields',
      'step: expected a duration such as "15min", or seconds above 0, got 0',
    ],
    ['a step backwards', json({ start: at(0), step: -60, values: [1] }), 'fields', 'seconds above 0, got -60'],
    [
      'times that do not rise',
      json([
        { time: at(2), value: 1 },
        { time: at(2), value: 2 },
      ]),
      'order',
      'points[1].time: expected a time after',
    ],
    [
      'an end before the last value',
      json({ points: [{ time: at(2), value: 1 }], end: at(1) }),
      'order',
      "end: expected a time after the last value's",
    ],
    [
      'a value out of range',
      json({ start: at(0), step: 60, values: [1, 11] }),
      'range',
      "value 2: expected 0 to 10, the input's range, got 11",
    ],
    [
      'a plan that is over',
      json({ start: at(-60), step: 60, values: [1] }),
      'past',
      'expected values ahead of 2026-03-01T12:00:00.000Z, got an end at 2026-03-01T11:01:00.000Z',
    ],
    [
      'the wrong year',
      json({ start: '2027-03-01T12:00:00Z', step: 60, values: [1] }),
      'far',
      'expected a start within 31d of',
    ],
    [
      'a step in the wrong unit',
      json({ start: at(0), step: 6e8, values: [1] }),
      'long',
      'expected at most 366d from start to end',
    ],
    ['a span past year 9999', json({ start: at(0), step: 1e13, values: [1, 1] }), 'long', 'expected at most 366d'],
    ['too many bytes', new Uint8Array(65_537).fill(0x20), 'size', 'expected at most 65536 bytes, got 65537'],
  ])('%s', (_, payload, reason, message) => {
    const refusal = refusalOf(() => parsePlan(payload, rules));
    expect(refusal.code).toBe('plan');
    expect(refusal.details.reason).toBe(reason);
    expect(refusal.message).toContain(message);
    expect(refusal.message).not.toContain('\n');
  });
});
