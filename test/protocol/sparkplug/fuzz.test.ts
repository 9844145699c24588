/**
 * Bytes from anywhere: never an exception, never without end, nothing kept. Corpus and mutations are seeded; a reader told
 * of more bytes than there are shows that the check can fail.
 */
import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { metricNumber } from '../../../protocol/sparkplug/metric.ts';
import { PayloadReader } from '../../../protocol/sparkplug/payload.ts';
import { SparkplugSessions } from '../../../protocol/sparkplug/sessions.ts';
import { WireReader } from '../../../protocol/sparkplug/wire.ts';
import { sparkplugBytes, sparkplugTopic } from '../../support/sparkplug.ts';

const SEED = 20260414;
const RUNS = 20_000;
const source = { group: 'g', node: 'n', device: 'd' };
const route = { source, channel: 0, metric: 'Level', isGood: null, conversion: null };
const topics = ['NBIRTH/n', 'NDATA/n', 'NDEATH/n', 'DBIRTH/n/d', 'DDATA/n/d', 'DDEATH/n/d'].map((tail) =>
  sparkplugTopic(`spBv1.0/g/${tail}`),
);

const corpus = [
  { timestamp: 1, seq: 0, metrics: [{ name: 'bdSeq', type: 'UInt64', value: 7 }] },
  {
    timestamp: 2,
    seq: 1,
    metrics: [
      {
        name: 'Level',
        alias: 3,
        timestamp: 2,
        type: 'Double',
        value: 1.5,
        properties: { Quality: { type: 'Int32', value: 192 } },
      },
    ],
  },
  { timestamp: 3, seq: 2, metrics: [{ alias: 3, timestamp: 3, type: 'Double', value: 2.5 }] },
].map(sparkplugBytes);

/** Takes every topic's view of some bytes; what a reading may be is checked. */
function feed(sessions: SparkplugSessions, bytes: Uint8Array): void {
  for (const topic of topics)
    sessions.take(topic, bytes, {
      take: (channel, value) => expect([channel, Number.isFinite(value)]).toEqual([0, true]),
      refuse: (channel) => expect(channel).toBe(0),
    });
}

const mutant = fc
  .tuple(
    fc.constantFrom(...corpus),
    fc.array(fc.tuple(fc.nat(), fc.constantFrom('set', 'insert', 'cut'), fc.nat(255)), { minLength: 1, maxLength: 8 }),
  )
  .map(([bytes, edits]) => {
    const out = [...bytes];
    for (const [at, kind, byte] of edits) {
      const place = at % (out.length + 1);
      if (kind === 'set' && place < out.length) out[place] = byte;
      else if (kind === 'insert') out.splice(place, 0, byte);
      else if (kind === 'cut') out.splice(place, 1 + (byte % 9));
    }
    return Uint8Array.from(out);
  });

describe('hostile bytes', () => {
  test('random ones', () => {
    const sessions = new SparkplugSessions([route]);
    fc.assert(
      fc.property(fc.uint8Array({ maxLength: 200 }), (bytes) => feed(sessions, bytes)),
      { seed: SEED, numRuns: RUNS },
    );
    expect(sessions.counts.unreadable).toBeGreaterThan(RUNS);
  });

  test('mutants of good ones', () => {
    const sessions = new SparkplugSessions([route]);
    fc.assert(
      fc.property(mutant, (bytes) => feed(sessions, bytes)),
      { seed: SEED, numRuns: RUNS },
    );
    expect(sessions.counts.unreadable).toBeGreaterThan(RUNS);
    expect(sessions.counts.births).toBeGreaterThan(1000);
  });

  test('every cut of a good one', () => {
    const sessions = new SparkplugSessions([route]);
    for (const bytes of corpus) for (let n = 0; n < bytes.length; n++) feed(sessions, bytes.subarray(0, n));
  });

  test.each<[string, number[]]>([
    ['a varint without end', Array<number>(20).fill(0xff)],
    ['a length past the end', [0x12, 0x7f]],
    ['a length past 2^32', [0x12, 0xff, 0xff, 0xff, 0xff, 0xff, 0x01]],
    ['field 0', [0x00, 0x01]],
    ['a group', [0x13, 0x14]],
    ['a metric that ends in a key', [0x12, 0x01, 0x08]],
    ['a name that is no text', [0x12, 0x03, 0x0a, 0x01, 0xff]],
    ['properties cut short', [0x12, 0x03, 0x4a, 0x01, 0x0a]],
  ])('%s is refused', (_, bytes) => expect(new PayloadReader().open(Uint8Array.from(bytes))).toBe(false));

  test('a birth of very many metrics leaves nothing behind but what is asked for', () => {
    const sessions = new SparkplugSessions([route]);
    const metrics = Array.from({ length: 5000 }, (_, i) => ({
      name: `other/${i}`,
      alias: i,
      type: 'Double',
      value: i,
    }));
    const birth = sparkplugBytes({ timestamp: 1, seq: 1, metrics });
    feed(sessions, birth);
    expect(JSON.stringify(sessions.save()).length).toBeLessThan(400);
  });

  test('the wire reader moves on at every step, and never past the end', () => {
    fc.assert(
      fc.property(fc.uint8Array({ maxLength: 100 }), (bytes) => {
        const wire = new WireReader();
        wire.open(bytes, 0, bytes.length);
        let steps = 0;
        while (wire.next()) {
          steps++;
          if (wire.wire === 2) expect(wire.to).toBeLessThanOrEqual(bytes.length);
        }
        expect(steps).toBeLessThanOrEqual(bytes.length / 2);
      }),
      { seed: SEED, numRuns: RUNS },
    );
  });

  test('these checks can fail: a wire reader told of more bytes than there are', () => {
    const wire = new WireReader();
    wire.open(Uint8Array.of(0x12, 0x05, 1), 0, 10);
    expect(wire.next() && wire.to > 3).toBe(true);
  });

  test('numbers too large to hold exactly are none', () => {
    const reader = new PayloadReader();
    // Int64 and UInt64 of 2^53, and all bits set.
    for (const [datatype, value, wanted] of [
      [8, 2n ** 53n, Number.NaN],
      [8, 2n ** 64n - 1n, Number.NaN],
      [4, 2n ** 64n - 1n, -1],
      [4, 2n ** 63n, Number.NaN],
    ] as const) {
      const bytes = [0x20, datatype, 0x58];
      for (let rest: bigint = value; ; rest >>= 7n) {
        bytes.push(Number(rest & 0x7fn) | (rest > 0x7fn ? 0x80 : 0));
        if (rest <= 0x7fn) break;
      }
      expect(reader.open(Uint8Array.of(0x12, bytes.length, ...bytes))).toBe(true);
      reader.visit((metric) => expect(metricNumber(metric, metric.datatype)).toBe(wanted));
    }
  });
});
