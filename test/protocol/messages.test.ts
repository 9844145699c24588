/** Every message: a round trip, and what it looks like. */
import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { forecastMessage, parseForecastMessage } from '../../protocol/forecast.ts';
import { forecastPathOf, forecastsMessage, parseForecastsMessage } from '../../protocol/forecasts.ts';
import { healthMessage, parseHealthMessage } from '../../protocol/health.ts';
import { formatInstant } from '../../protocol/instant.ts';
import { parseReceiptMessage, receiptMessage } from '../../protocol/receipt.ts';
import { parseStateMessage, stateMessage } from '../../protocol/state.ts';
import { ADVISORY } from '../../protocol/version.ts';
import { counters, digest, forecast, forecasts, health, json, poor, receipt, state, T0 } from '../support/messages.ts';

const SEED = 20260309;

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

test('moments in messages are written in UTC to the millisecond', () => {
  expect(json(stateMessage(state)).issued_at).toBe(formatInstant(T0 + 1234));
});
