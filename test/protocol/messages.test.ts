/** Every message: a round trip, what it looks like, and what is refused. */
import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { decode, encode } from '../../protocol/codec.ts';
import { forecastMessage, parseForecastMessage } from '../../protocol/forecast.ts';
import { forecastPathOf, forecastsMessage, parseForecastsMessage } from '../../protocol/forecasts.ts';
import { healthMessage, parseHealthMessage } from '../../protocol/health.ts';
import { formatInstant } from '../../protocol/instant.ts';
import type { MessageHead } from '../../protocol/message.ts';
import { parseReceiptMessage, receiptMessage } from '../../protocol/receipt.ts';
import { parseStateMessage, stateMessage } from '../../protocol/state.ts';
import { ADVISORY } from '../../protocol/version.ts';
import { refusalOf } from '../support/refusal.ts';

const SEED = 20260309;
const T0 = Date.UTC(2026, 2, 1, 12);
const digest = Uint8Array.from({ length: 32 }, (_, i) => i);
const head: MessageHead = {
  site: 'mill-lane',
  gateway: 'box-1',
  bundle: digest,
  sequence: 4,
  issuedAtMs: T0 + 1234,
  validUntilMs: T0 + 120_000,
  quality: null,
  qualityReason: null,
};
const poor: MessageHead = { ...head, bundle: null, sequence: null, quality: 'F', qualityReason: 'no bundle yet' };
const state = {
  ...head,
  originMs: T0,
  tickMs: 60_000,
  filtered: { level: 1.25 },
  state: Float64Array.of(0.5, -2),
  missing: ['inflow'],
};
const forecast = {
  ...head,
  signal: 'level',
  unit: 'm',
  originMs: T0,
  tickMs: 60_000,
  coverage: 0.9,
  median: [1, 2],
  lower: [0.5, 1],
  upper: [1.5, 3],
  limits: [
    { limit: 'high' as const, value: 2.5, probability: 0.75, timeMs: T0 + 120_000 },
    { limit: 'low' as const, value: 0, probability: 0, timeMs: null },
  ],
  inputs: 'held' as const,
  lastReadingMs: T0 + 30_000,
};
const forecasts = {
  ...head,
  bundle: digest,
  sequence: 4,
  originMs: T0,
  tickMs: 60_000,
  horizon: 2,
  coverage: 0.9,
  signals: ['level', 'inflow'],
  median: [1, 2, 30, 40],
  lower: [0.5, 1, 20, 20],
  upper: [1.5, 3, 40, 60],
};
const counters = {
  readings: 10,
  refused: { value: 1 },
  late: 0,
  ticks: 9,
  segments_open: 1,
  segments_waiting: 2,
  segments_confirmed: 3,
};
const health = {
  ...head,
  status: 'running' as const,
  counters,
  lastChange: { atMs: T0, from: null, to: 'ab'.repeat(32), outcome: 'changed', reason: null },
  versions: { gateway: '0.1.0' },
};
const receipt = {
  site: 'mill-lane',
  gateway: 'box-1',
  stream: new Uint8Array(8).fill(3),
  segments: [{ number: 0, hash: digest }],
};
const json = (payload: Uint8Array): Record<string, unknown> => JSON.parse(new TextDecoder().decode(payload));

describe('what people and PLCs read', () => {
  test('the head: who, by which bundle, until when, and the advisory mark; quality only when not good', () => {
    expect(json(stateMessage(state))).toEqual({
      format: 1,
      kind: 'state',
      site: 'mill-lane',
      gateway: 'box-1',
      bundle: '000102030405060708090a0b0c0d0e0f101112131415161718191a1b1c1d1e1f',
      sequence: 4,
      issued_at: '2026-03-01T12:00:01.234Z',
      valid_until: '2026-03-01T12:02:00.000Z',
      advisory: ADVISORY,
      origin: '2026-03-01T12:00:00.000Z',
      tick_s: 60,
      filtered: { level: 1.25 },
      state: [0.5, -2],
      missing: ['inflow'],
    });
    const health = json(healthMessage({ ...poor, status: 'no-bundle', counters, lastChange: null, versions: {} }));
    expect(health).toMatchObject({ bundle: null, sequence: null, quality: 'F', quality_reason: 'no bundle yet' });
  });

  test('a forecast: step h at index h - 1, limits with probability and time', () => {
    expect(json(forecastMessage(forecast))).toMatchObject({
      kind: 'forecast',
      signal: 'level',
      median: [1, 2],
      limits: [
        { limit: 'high', value: 2.5, probability: 0.75, time: '2026-03-01T12:02:00.000Z' },
        { limit: 'low', value: 0, probability: 0, time: null },
      ],
      inputs: 'held',
      last_reading_at: '2026-03-01T12:00:30.000Z',
    });
  });

  test('every message reads back to itself', () => {
    expect(parseStateMessage(stateMessage(state))).toEqual(json(stateMessage(state)));
    expect(parseForecastMessage(forecastMessage(forecast))).toEqual(json(forecastMessage(forecast)));
    expect(parseHealthMessage(healthMessage(health))).toEqual(json(healthMessage(health)));
    const more = {
      ...health,
      status: 'lost' as const,
      counters: { ...counters, reconnects: 4, by_kind: { a: 1 } },
      lastChange: null,
    };
    expect(parseHealthMessage(healthMessage(more)).counters).toMatchObject({ reconnects: 4, by_kind: { a: 1 } });
  });
});

describe('what our own parts exchange', () => {
  test('the compact forecast gives every signal its path', () => {
    const message = parseForecastsMessage(forecastsMessage(forecasts));
    expect(message).toMatchObject({
      kind: 'forecasts',
      signals: ['level', 'inflow'],
      advisory: ADVISORY,
      bundle: digest,
    });
    expect('quality' in message).toBe(false);
    expect(forecastPathOf(message, 1)).toEqual({
      median: Float64Array.of(30, 40),
      lower: Float64Array.of(20, 20),
      upper: Float64Array.of(40, 60),
    });
  });

  test('any paths come back as float32', () => {
    const width = fc.double({ min: 0, max: 1e6, noNaN: true });
    const step = fc.tuple(fc.double({ min: -1e6, max: 1e6, noNaN: true }), width, width);
    fc.assert(
      fc.property(
        fc.integer({ min: 1, max: 4 }),
        fc.array(step, { minLength: 12, maxLength: 12 }),
        (signals, steps) => {
          const horizon = 12 / [1, 2, 3, 4][signals - 1]!;
          const median = steps.map(([middle]) => middle);
          const lower = steps.map(([middle, below]) => middle - below);
          const upper = steps.map(([middle, , above]) => middle + above);
          const names = Array.from({ length: signals }, (_, i) => `s${i}`);
          const message = parseForecastsMessage(
            forecastsMessage({ ...forecasts, signals: names, horizon, median, lower, upper }),
          );
          names.forEach((_, i) => {
            const path = forecastPathOf(message, i);
            expect([...path.median]).toEqual(median.slice(i * horizon, (i + 1) * horizon).map(Math.fround));
            expect([...path.upper]).toEqual(upper.slice(i * horizon, (i + 1) * horizon).map(Math.fround));
          });
        },
      ),
      { seed: SEED, numRuns: 60 },
    );
  });

  test('any receipt comes back', () => {
    const hash = fc.uint8Array({ minLength: 32, maxLength: 32 });
    const segment = fc.record({ number: fc.nat(2 ** 32 - 1), hash }, { noNullPrototype: true });
    fc.assert(
      fc.property(
        fc.uint8Array({ minLength: 8, maxLength: 8 }),
        fc.array(segment, { minLength: 1, maxLength: 9 }),
        (stream, segments) => {
          const message = parseReceiptMessage(receiptMessage({ ...receipt, stream, segments }));
          expect(message).toStrictEqual({
            format: 1,
            kind: 'receipt',
            site: 'mill-lane',
            gateway: 'box-1',
            stream,
            segments,
          });
        },
      ),
      { seed: SEED },
    );
  });
});

test('any state message comes back', () => {
  const finite = fc.double({ noNaN: true, noDefaultInfinity: true }).map((value) => value + 0);
  fc.assert(
    fc.property(
      fc.array(finite),
      fc.dictionary(fc.constantFrom('a', 'b', 'c'), finite, { noNullPrototype: true }),
      (x, filtered) => {
        const message = parseStateMessage(stateMessage({ ...state, state: x, filtered }));
        expect([message.state, message.filtered]).toEqual([x, filtered]);
      },
    ),
    { seed: SEED },
  );
});

describe('building refuses', () => {
  test.each<[string, () => unknown, string]>([
    [
      'NaN in a state',
      () => stateMessage({ ...state, state: [1, Number.NaN] }),
      'message: state[1]: expected a finite number, got NaN',
    ],
    ['NaN in a filtered value', () => stateMessage({ ...state, filtered: { level: Number.NaN } }), 'filtered.level'],
    ['infinity in a path', () => forecastMessage({ ...forecast, upper: [2, Number.POSITIVE_INFINITY] }), 'upper[1]'],
    [
      'paths of two lengths',
      () => forecastMessage({ ...forecast, lower: [0.5] }),
      'expected three paths of one length, got median 2, lower 1, upper 2',
    ],
    [
      'bounds beside the median',
      () => forecastMessage({ ...forecast, lower: [0.5, 2.5] }),
      'step 2: expected lower <= median <= upper, got 2.5, 2, 3',
    ],
    [
      'NaN in the compact forecast',
      () => forecastsMessage({ ...forecasts, median: [1, 2, 3, Number.NaN] }),
      'signal "inflow", step 2: expected a finite number within float32, got NaN',
    ],
    [
      'a value past float32',
      () => forecastsMessage({ ...forecasts, upper: [1e39, 2, 3, 4] }),
      'signal "level", step 1',
    ],
    [
      'a path too short',
      () => forecastsMessage({ ...forecasts, lower: [1, 2, 3] }),
      'expected three paths of 2 × 2 numbers, got 4, 3, 4',
    ],
    ['a receipt for nothing', () => receiptMessage({ ...receipt, segments: [] }), 'expected 1 to 1024 segments, got 0'],
    [
      'a receipt for too many',
      () => receiptMessage({ ...receipt, segments: Array(1025).fill(receipt.segments[0]) }),
      'got 1025',
    ],
    [
      'a short stream id',
      () => receiptMessage({ ...receipt, stream: new Uint8Array(7) }),
      'stream: expected 8 bytes, got 7 bytes',
    ],
    [
      'a short hash',
      () => receiptMessage({ ...receipt, segments: [{ number: 1, hash: new Uint8Array(31) }] }),
      'segments[0].hash: expected 32 bytes, got 31 bytes',
    ],
  ])('%s', (_, action, message) => expect(refusalOf(action).message).toContain(message));
});

describe('reading refuses', () => {
  const change = (payload: Uint8Array, fields: Record<string, unknown>): Uint8Array =>
    new TextEncoder().encode(JSON.stringify({ ...json(payload), ...fields }));
  const repack = (payload: Uint8Array, fields: Record<string, unknown>): Uint8Array =>
    encode({ ...(decode(payload) as object), ...fields });

  test.each<[string, () => unknown, string, string]>([
    [
      'no bytes',
      () => parseStateMessage(new Uint8Array(0)),
      'decode',
      'state message: expected JSON text in UTF-8, got 0 other bytes',
    ],
    ['malformed text', () => parseHealthMessage(Uint8Array.of(0x22, 0xff, 0x22)), 'decode', 'health message'],
    [
      'another kind',
      () => parseStateMessage(forecastMessage(forecast)),
      'format',
      'state message: kind: expected "state", got "forecast"',
    ],
    [
      'another format',
      () => parseStateMessage(change(stateMessage(state), { format: 2 })),
      'format',
      'format: expected 1, got 2',
    ],
    ['a list', () => parseStateMessage(new TextEncoder().encode('[]')), 'format', 'format: expected 1, got nothing'],
    [
      'a missing field',
      () => parseStateMessage(change(stateMessage(state), { missing: undefined })),
      'schema',
      'missing: expected a list, got nothing',
    ],
    [
      'an unknown field',
      () => parseStateMessage(change(stateMessage(state), { stat: [] })),
      'schema',
      'stat is not a known key',
    ],
    [
      'a time without zone',
      () => parseStateMessage(change(stateMessage(state), { origin: '2026-03-01T12:00:00' })),
      'schema',
      'origin: expected an ISO 8601 time with zone, got "2026-03-01T12:00:00"',
    ],
    [
      'a short digest',
      () => parseHealthMessage(change(healthMessage(health), { bundle: 'abcd' })),
      'schema',
      'bundle: expected 64 hexadecimal digits, got "abcd"',
    ],
    [
      'an unknown status',
      () => parseHealthMessage(change(healthMessage(health), { status: 'fine' })),
      'schema',
      'status: expected "starting" or "no-bundle"',
    ],
    [
      'a negative count',
      () => parseHealthMessage(change(healthMessage(health), { counters: { ...counters, late: -1 } })),
      'schema',
      'counters.late: expected at least 0, got -1',
    ],
    [
      'an unknown quality',
      () => parseHealthMessage(change(healthMessage(health), { quality: 'X' })),
      'schema',
      'quality: expected "F" or "C" or "S" or "M", got "X"',
    ],
    [
      'a probability past 1',
      () =>
        parseForecastMessage(
          change(forecastMessage(forecast), { limits: [{ limit: 'high', value: 1, probability: 1.5, time: null }] }),
        ),
      'schema',
      'limits[0].probability: expected at most 1, got 1.5',
    ],
    [
      'paths of two lengths',
      () => parseForecastMessage(change(forecastMessage(forecast), { median: [1] })),
      'schema',
      'expected three paths of one length',
    ],
    [
      'a null in a path',
      () => parseForecastMessage(change(forecastMessage(forecast), { median: [1, null] })),
      'schema',
      'median[1]: expected a number, got null',
    ],
    ['JSON for the compact forecast', () => parseForecastsMessage(forecastMessage(forecast)), 'scan', 'further bytes'],
    [
      'a compact path too short',
      () => parseForecastsMessage(repack(forecastsMessage(forecasts), { path: new Uint8Array(47) })),
      'schema',
      'path: expected 48 bytes for 2 signals × 3 × 2 steps, got 47',
    ],
    [
      'NaN in a compact path',
      () => parseForecastsMessage(repack(forecastsMessage(forecasts), { path: new Uint8Array(48).fill(255) })),
      'schema',
      'signal "level", step 1: expected finite lower <= median <= upper, got NaN',
    ],
    [
      'a receipt with a field too many',
      () => parseReceiptMessage(repack(receiptMessage(receipt), { all: true })),
      'schema',
      'all is not a known key',
    ],
    [
      'more than a mebibyte',
      () => parseReceiptMessage(new Uint8Array(1_048_577)),
      'size',
      'receipt message: expected at most 1048576 bytes, got 1048577',
    ],
  ])('%s', (_, action, code, message) => {
    const refusal = refusalOf(action);
    expect(refusal.message).toContain(message);
    expect(refusal.code).toBe(code);
    expect(refusal.message.split('\n')).toHaveLength(1);
  });

  test('every payload cut at any byte', () => {
    const cases: [Uint8Array, (payload: Uint8Array) => unknown][] = [
      [stateMessage(state), parseStateMessage],
      [forecastMessage(forecast), parseForecastMessage],
      [healthMessage(health), parseHealthMessage],
      [forecastsMessage(forecasts), parseForecastsMessage],
      [receiptMessage(receipt), parseReceiptMessage],
    ];
    for (const [payload, parse] of cases) {
      for (let length = 0; length < payload.length; length++) {
        expect(['decode', 'scan']).toContain(refusalOf(() => parse(payload.subarray(0, length))).code);
      }
    }
  });
});

test('moments in messages are written in UTC to the millisecond', () => {
  expect(json(stateMessage(state)).issued_at).toBe(formatInstant(T0 + 1234));
});
