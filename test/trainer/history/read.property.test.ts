/** However the same readings are written down, the series is the same. Seed given, so that a failure comes back. */

import { gzipSync } from 'node:zlib';
import fc from 'fast-check';
import { afterAll, describe, expect, it } from 'vitest';
import { loadHistory } from '../../../trainer/history/load.ts';
import { numberOfBytes } from '../../../trainer/history/numbers.ts';
import { quantiles } from '../../../trainer/history/order-statistics.ts';
import { Folder, signal, site } from './support.ts';

const folder = new Folder();
afterAll(() => folder.remove());
const SITE = site([signal('level', { aggregate: 'mean' }), signal('flow', { aggregate: 'last' })], { tickMs: 300_000 });
const START = Date.UTC(2024, 2, 30);

const row = fc.record({
  level: fc.option(
    fc.integer({ min: -500, max: 500 }).map((k) => (k / 100).toFixed(2)),
    { nil: '' },
  ),
  flow: fc.integer({ min: 0, max: 90 }).map(String),
});
/** Rows at distinct times, a minute and some seconds apart. */
const rows = fc
  .array(row, { minLength: 12, maxLength: 60 })
  .map((all) => all.map((one, n) => ({ ...one, time: new Date(START + n * 67_000).toISOString() })));
type Rows = { time: string; level: string; flow: string }[];

let number = 0;
const write = (content: string | Uint8Array): string => folder.write(`p${number++}`, content);
const wide = (all: Rows, separator = ','): string =>
  [`time,level,flow`, ...all.map((r) => `${r.time},${r.level},${r.flow}`)].join('\n').replaceAll(',', separator) + '\n';
const digest = async (files: string[]): Promise<string> =>
  Buffer.from((await loadHistory(files, SITE, { zone: null })).series.digest).toString('hex');

describe('one history, many ways to write it', () => {
  it('shuffled, split, packed, long, with other separators: the same series', async () => {
    await fc.assert(
      fc.asyncProperty(
        rows,
        fc.integer({ min: 1, max: 11 }),
        fc.infiniteStream(fc.double({ min: 0, max: 1, noNaN: true })),
        async (all, cut, order) => {
          fc.pre(all.some((r) => r.level !== ''));
          const plain = await digest([write(wide(all))]);
          const keys = new Map(all.map((r) => [r, order.next().value as number]));
          const shuffled = all.toSorted((a, b) => keys.get(a)! - keys.get(b)!);
          expect(await digest([write(wide(shuffled))])).toBe(plain);
          expect(await digest([write(wide(all.slice(cut))), write(wide(all.slice(0, cut)))])).toBe(plain);
          expect(await digest([write(gzipSync(wide(all, ';')))])).toBe(plain);
          const long = all.flatMap((r) => [`${r.time}\tlevel\t${r.level || 'NA'}`, `${r.time}\tflow\t${r.flow}`]);
          expect(await digest([write(`time\tsignal\tvalue\n${long.join('\n')}\n`)])).toBe(plain);
          const lines = all.flatMap((r) => [
            { time: Date.parse(r.time), signal: 'level', value: r.level === '' ? null : Number(r.level) },
            { time: Date.parse(r.time), signal: 'flow', value: Number(r.flow) },
          ]);
          expect(await digest([write(lines.map((line) => JSON.stringify(line)).join('\n'))])).toBe(plain);
          const captured = all.flatMap((r) => [
            ...(r.level === '' ? [] : [{ time: r.time, topic: 'plant/test/level', payload: r.level }]),
            {
              time: r.time,
              topic: 'plant/test/flow',
              payload: Buffer.from(r.flow).toString('base64'),
              encoding: 'base64',
            },
          ]);
          expect(await digest([write(captured.map((line) => JSON.stringify(line)).join('\n'))])).toBe(plain);
        },
      ),
      { seed: 20240331, numRuns: 25 },
    );
  });
  it('and one reading changed gives another series', async () => {
    const all = Array.from({ length: 12 }, (_, n) => ({
      time: new Date(START + n * 67_000).toISOString(),
      level: '1.00',
      flow: '3',
    }));
    const other = all.map((r, n) => (n === 5 ? { ...r, level: '1.50' } : r));
    expect(await digest([write(wide(other))])).not.toBe(await digest([write(wide(all))]));
  });
});

describe('numbers and quantiles', () => {
  it('reads every decimal as Number() does', () => {
    const text = fc.oneof(
      fc.double({ noNaN: true, noDefaultInfinity: true }).map(String),
      fc.tuple(fc.maxSafeNat(), fc.integer({ min: 0, max: 12 })).map(([k, d]) => (k / 10 ** d).toFixed(d)),
      fc.integer().map((k) => `${k}.`),
      fc.integer({ min: 0 }).map((k) => `-.${k}`),
    );
    fc.assert(
      fc.property(text, (one) => {
        const bytes = Buffer.from(`;${one};`);
        expect(Object.is(numberOfBytes(bytes, 1, bytes.length - 1), Number(one))).toBe(true);
      }),
      { seed: 7, numRuns: 3000 },
    );
  });
  it.each(['', '-', 'NA', 'n/a', 'NaN', 'null', 'NULL'])('takes %j for a missing reading', (mark) => {
    expect(numberOfBytes(Buffer.from(mark), 0, mark.length)).toBeNaN();
  });
  it.each(['.', '-.', '+', '1.2.3', '0x10', 'Infinity', '1 2', '--1', '1e', 'abc'])(
    'takes %j for no number',
    (text) => {
      expect(numberOfBytes(Buffer.from(text), 0, text.length)).toBe(Number.POSITIVE_INFINITY);
    },
  );
  it('selects what sorting selects', () => {
    fc.assert(
      fc.property(fc.array(fc.integer({ min: -9, max: 9 }), { minLength: 1 }), (values) => {
        const sorted = Float64Array.from(values).sort();
        const at = (share: number): number => sorted[Math.floor(share * (sorted.length - 1))]!;
        expect(quantiles(Float64Array.from([...values, Number.NaN]), [0, 0.3, 0.5, 1])).toEqual(
          [0, 0.3, 0.5, 1].map(at),
        );
      }),
      { seed: 9, numRuns: 500 },
    );
  });
});
