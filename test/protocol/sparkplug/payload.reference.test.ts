/**
 * What our reader finds in payloads that another program encoded: sparkplug-payload 1.0.3, see test/support/sparkplug.ts.
 * The standard's own examples are those of Sparkplug 3.0 (ISO/IEC 20237), sections 6.4.19 NBIRTH, 6.4.20 DBIRTH, 6.4.21
 * NDATA, 6.4.22 DDATA, 6.4.25 NDEATH and 6.4.26 DDEATH, which it writes as JSON.
 */
import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { DATATYPES, metricNumber } from '../../../protocol/sparkplug/metric.ts';
import { PayloadReader } from '../../../protocol/sparkplug/payload.ts';
import { type MadeMetric, type MadePayload, sparkplugBytes } from '../../support/sparkplug.ts';

const SEED = 20260413;

function read(payload: MadePayload) {
  const reader = new PayloadReader();
  expect(reader.open(sparkplugBytes(payload))).toBe(true);
  const metrics: { name: string | null; alias: unknown; timeMs: number; value: number; quality: unknown }[] = [];
  reader.visit((metric) =>
    metrics.push({
      name: metric.name,
      alias: metric.alias,
      timeMs: metric.timeMs,
      value: metricNumber(metric, metric.datatype),
      quality: metric.quality,
    }),
  );
  return { timeMs: reader.timeMs, seq: reader.seq, metrics };
}

const AT = 1_486_144_502_122;
const metric = (name: string, type: string, value: unknown): MadeMetric => ({ name, timestamp: AT, type, value });

describe('the examples of the standard', () => {
  test('NBIRTH (6.4.19)', () => {
    const { timeMs, seq, metrics } = read({
      timestamp: AT,
      seq: 0,
      metrics: [
        metric('bdSeq', 'UInt64', 0),
        metric('Node Control/Reboot', 'Boolean', false),
        metric('Node Control/Rebirth', 'Boolean', false),
        metric('Node Control/Next Server', 'Boolean', false),
        metric('Node Control/Scan Rate', 'Int64', 3000),
        metric('Properties/Hardware Make', 'String', 'Raspberry Pi'),
        metric('Supply Voltage', 'Float', 12.1),
      ],
    });
    expect([timeMs, seq]).toEqual([AT, 0]);
    expect(metrics.map(({ name, value }) => [name, value])).toEqual([
      ['bdSeq', 0],
      ['Node Control/Reboot', 0],
      ['Node Control/Rebirth', 0],
      ['Node Control/Next Server', 0],
      ['Node Control/Scan Rate', 3000],
      ['Properties/Hardware Make', Number.NaN],
      ['Supply Voltage', Math.fround(12.1)],
    ]);
    expect(metrics.every((one) => one.timeMs === AT && one.quality === undefined)).toBe(true);
  });

  test('DBIRTH (6.4.20), NDATA (6.4.21), DDATA (6.4.22)', () => {
    expect(read({ timestamp: AT, seq: 1, metrics: [metric('Inputs/A', 'Boolean', false)] })).toMatchObject({
      seq: 1,
      metrics: [{ name: 'Inputs/A', value: 0 }],
    });
    expect(read({ timestamp: AT, seq: 2, metrics: [metric('Supply Voltage', 'Float', 12.3)] })).toMatchObject({
      seq: 2,
      metrics: [{ value: Math.fround(12.3) }],
    });
    expect(
      read({
        timestamp: AT,
        seq: 0,
        metrics: [metric('Inputs/A', 'Boolean', true), metric('Inputs/C', 'Boolean', true)],
      }),
    ).toMatchObject({ seq: 0, metrics: [{ value: 1 }, { value: 1 }] });
  });

  test('NDEATH has no number (6.4.25), DDEATH no metrics (6.4.26)', () => {
    expect(read({ timestamp: AT, metrics: [metric('bdSeq', 'UInt64', 0)] })).toMatchObject({
      seq: -1,
      metrics: [{ name: 'bdSeq', value: 0 }],
    });
    expect(read({ timestamp: AT, seq: 123 })).toEqual({ timeMs: AT, seq: 123, metrics: [] });
  });
});

/** Datatypes of the standard (6.4.16) with their ends. */
const TYPES: Readonly<Record<string, fc.Arbitrary<number | boolean>>> = {
  Int8: fc.integer({ min: -128, max: 127 }),
  Int16: fc.integer({ min: -32_768, max: 32_767 }),
  Int32: fc.integer({ min: -(2 ** 31), max: 2 ** 31 - 1 }),
  Int64: fc.maxSafeInteger(),
  UInt8: fc.integer({ min: 0, max: 255 }),
  UInt16: fc.integer({ min: 0, max: 65_535 }),
  UInt32: fc.integer({ min: 0, max: 2 ** 32 - 1 }),
  UInt64: fc.maxSafeNat(),
  Float: fc.float({ noNaN: true, noDefaultInfinity: true }),
  Double: fc.double({ noNaN: true, noDefaultInfinity: true }),
  Boolean: fc.boolean(),
};

describe('datatypes', () => {
  test('are those that hold numbers or truth values', () =>
    expect(Object.values(DATATYPES).sort()).toEqual(Object.keys(TYPES).sort()));

  test.each(Object.keys(TYPES))('%s', (type) => {
    fc.assert(
      fc.property(TYPES[type]!, (value) => {
        expect(read({ seq: 0, metrics: [{ name: 'm', type, value }] }).metrics[0]!.value).toBe(Number(value));
      }),
      { seed: SEED, numRuns: 200 },
    );
  });

  test.each([
    ['Int64', -(2 ** 53) + 1],
    ['Int64', -1],
    ['Int64', -(2 ** 32)],
    ['UInt64', 2 ** 53 - 1],
    ['Int32', -(2 ** 31)],
    ['Int8', -128],
    ['Double', Number.MIN_VALUE],
    ['Double', -Number.MAX_VALUE],
  ])('%s %d', (type, value) =>
    expect(read({ seq: 0, metrics: [{ name: 'm', type, value }] }).metrics[0]!.value).toBe(value),
  );

  test.each(['String', 'Text', 'DateTime', 'UUID'])('%s is no number', (type) => {
    const value = type === 'DateTime' ? new Date(AT) : '12';
    expect(read({ seq: 0, metrics: [{ name: 'm', type, value }] }).metrics[0]!.value).toBeNaN();
  });
});

describe('metrics', () => {
  test('with aliases instead of names, times and history', () => {
    fc.assert(
      fc.property(fc.array(fc.tuple(fc.integer({ min: 0, max: 2 ** 31 - 1 }), fc.nat(4e12), TYPES.Double!)), (all) => {
        const metrics = all.map(([alias, timestamp, value]) => ({ alias, timestamp, type: 'Double', value }));
        expect(read({ timestamp: AT, seq: 255, metrics }).metrics).toEqual(
          all.map(([alias, timeMs, value]) => ({ name: null, alias, timeMs, value, quality: undefined })),
        );
      }),
      { seed: SEED, numRuns: 100 },
    );
  });

  // 6.4.9: the property "Quality", Int32, 0 bad, 192 good, 500 stale.
  test.each([0, 192, 500])('quality %d, whatever properties stand beside it', (code) => {
    const quality = { type: 'Int32', value: code };
    const other = { type: 'Int32', value: 77 };
    for (const properties of [
      { Quality: quality },
      { engUnit: { type: 'String', value: 'm' }, engLow: other, Quality: quality, engHigh: other },
    ])
      expect(read({ seq: 0, metrics: [{ name: 'm', type: 'Float', value: 1, properties }] }).metrics[0]!.quality).toBe(
        code,
      );
  });
});
