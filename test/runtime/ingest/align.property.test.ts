import fc from 'fast-check';
import { expect, test } from 'vitest';
import { Aligner } from '../../../runtime/ingest/align.ts';

const SEED = 20261;
const AGGREGATES = ['last', 'mean', 'min', 'max', 'sum', 'increment'] as const;

interface Reading {
  readonly channel: number;
  readonly timeMs: number;
  readonly value: number;
}

/** Each reading with the delay it arrives with, so that the order of arrival is by time + delay. */
const feed = fc.array(
  fc.record({
    channel: fc.nat(AGGREGATES.length - 1),
    timeMs: fc.nat(60_000),
    value: fc.double({ min: -1e6, max: 1e6, noNaN: true }),
    delayMs: fc.nat(2000),
    twice: fc.boolean(),
  }),
  { maxLength: 120 },
);

/** One value per channel and instant, so that "the later arrival wins" never has to decide. */
function distinct<T extends Reading>(readings: readonly T[]): T[] {
  return [...new Map(readings.map((reading) => [`${reading.channel}:${reading.timeMs}`, reading])).values()];
}

function run(readings: readonly Reading[], latenessMs: number): string[] {
  const a = new Aligner({ tickMs: 1000, latenessMs, aggregates: AGGREGATES });
  const out: string[] = [];
  const take = () => a.close(null, ({ tick, values }) => out.push(`${tick}: ${[...values].join(' ')}`));
  for (const { channel, timeMs, value } of readings) {
    expect(['taken', 'duplicate']).toContain(a.place(channel, timeMs, value, null, () => {}));
    take();
  }
  a.place(0, 80_000, 0, null, () => {});
  take();
  return out;
}

test('any order of arrival within the lateness, with duplicates, closes the same ticks to the bit', () => {
  fc.assert(
    fc.property(feed, (raw) => {
      const readings = distinct(raw);
      const inOrder = [...readings].sort((a, b) => a.timeMs - b.timeMs);
      const arrivals = readings
        .flatMap((reading) => [reading, ...(reading.twice ? [{ ...reading, delayMs: 2000 - reading.delayMs }] : [])])
        .sort((a, b) => a.timeMs + a.delayMs - (b.timeMs + b.delayMs));
      expect(run(arrivals, 2000)).toEqual(run(inOrder, 2000));
    }),
    { seed: SEED, numRuns: 300 },
  );
});

test('the property can fail: with less lateness than delay, orders differ', () => {
  const readings = [
    { channel: 0, timeMs: 1500, value: 1 },
    { channel: 0, timeMs: 3100, value: 2 },
  ];
  expect(() => run([...readings].reverse(), 0)).toThrow();
});
