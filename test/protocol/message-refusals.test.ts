/** Every message: what is refused, in building and in reading. */
import { describe, expect, test } from 'vitest';
import { decode, encode } from '../../protocol/codec.ts';
import { forecastMessage, parseForecastMessage } from '../../protocol/forecast.ts';
import { forecastsMessage, parseForecastsMessage } from '../../protocol/forecasts.ts';
import { healthMessage, parseHealthMessage } from '../../protocol/health.ts';
import { parseReceiptMessage, receiptMessage } from '../../protocol/receipt.ts';
import { parseStateMessage, stateMessage } from '../../protocol/state.ts';
import { counters, forecast, forecasts, health, json, receipt, state } from '../support/messages.ts';
import { refusalOf } from '../support/refusal.ts';

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
