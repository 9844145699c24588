/** Readings on ticks, aggregates, lattices. */
import { afterAll, describe, expect, it } from 'vitest';
import { type Aggregate, documentPayload } from '../../../protocol/index.ts';
import { TickValue } from '../../../trainer/history/aggregate.ts';
import { loadHistory } from '../../../trainer/history/load.ts';
import { findLattice } from '../../../trainer/history/resolution.ts';
import { Folder, signal, site } from './support.ts';

const folder = new Folder();
afterAll(() => folder.remove());

function ticksOf(how: Aggregate, readings: readonly (readonly [number, number])[]): number[] {
  const tick = new TickValue(how);
  const out: number[] = [];
  let open = 0;
  for (const [n, value] of readings) {
    while (open < n) {
      out.push(tick.close());
      open++;
    }
    tick.add(n, value);
  }
  return [...out, tick.close()];
}

describe('aggregates', () => {
  const readings = [
    [0, 3],
    [0, 5],
    [0, 1],
    [2, 7],
  ] as const;
  it.each([
    ['last', [1, Number.NaN, 7]],
    ['mean', [3, Number.NaN, 7]],
    ['min', [1, Number.NaN, 7]],
    ['max', [5, Number.NaN, 7]],
    ['sum', [9, Number.NaN, 7]],
  ] as const)('%s', (how, expected) => expect(ticksOf(how, readings)).toEqual(expected));
  it('increment of a counter: resets count from zero, a gap belongs to no tick', () => {
    expect(
      ticksOf('increment', [
        [0, 100],
        [1, 104],
        [1, 106],
        [2, 3],
        [4, 9],
        [5, 10],
      ]),
    ).toEqual([Number.NaN, 6, 3, Number.NaN, Number.NaN, 1]);
  });
});

describe('lattices', () => {
  const many = (make: (k: number) => number): Float64Array =>
    Float64Array.from({ length: 400 }, (_, k) => make((k * 37) % 151));
  it.each([
    ['tenths', (k: number) => k / 10, { step: 0.1, offset: 0, how: 'decimals' }],
    ['halves', (k: number) => k / 2, { step: 0.5, offset: 0, how: 'multiples' }],
    ['multiples of 16', (k: number) => k * 16, { step: 16, offset: 0, how: 'multiples' }],
    ['a quarter above halves', (k: number) => 0.25 + k / 2, { step: 0.5, offset: 0.25, how: 'multiples' }],
    [
      '32-bit floats of thousandths',
      (k: number) => Math.fround(k / 1000 + 5),
      { step: 0.001, offset: 0, how: 'float32 decimals' },
    ],
    [
      'billionths with three digits',
      (k: number) => Number(`${k + 100}e-11`),
      { step: 1e-11, offset: 0, how: 'decimals' },
    ],
    ['decimals after arithmetic', (k: number) => k * 0.1 + 0.2, { step: 0.1, offset: 0, how: 'decimals' }],
  ])('%s', (_, make, expected) => expect(findLattice(many(make))).toEqual(expected));
  it('stays at the decimals where one value does not fit, or few values were seen', () => {
    const spoilt = many((k) => k / 2);
    spoilt[7] = 3.1;
    expect(findLattice(spoilt)).toMatchObject({ step: 0.1, how: 'decimals' });
    expect(findLattice(many((k) => (k % 2) * 100))).toMatchObject({ step: 1 });
    expect(findLattice(Float64Array.of(...many((k) => k / 10), 1e12))).toMatchObject({ step: 0.1 });
  });
  it('gives computed values a step far below their movement', () => {
    const { step, how } = findLattice(many((k) => Math.sin(k) * 10));
    expect(how).toBe('computed');
    expect(step).toBeLessThan(0.01);
    expect(step).toBeGreaterThan(1e-6);
  });
});

describe('from file to ticks', () => {
  it('sorts, keeps repeats by the aggregate, leaves out what cannot be, takes inputs after signals, shares files', async () => {
    const a = folder.write(
      'a.csv',
      'when,b,a\n2024-01-01T00:02:00Z,1,5\n2024-01-01T00:00:00Z,2,6\n2024-01-01T00:00:00Z,4,999\n',
    );
    const c = folder.write('c.csv', 'time,cmd\n1704067260,1\n');
    const asked = site([signal('alpha', { column: 'a', range: [0, 10] }), signal('b', { aggregate: 'mean' })], {
      inputs: [{ ...signal('cmd'), planTopic: null }],
    });
    const { series } = await loadHistory([a, c], asked, { zone: null });
    expect(series).toMatchObject({
      names: ['alpha', 'b', 'cmd'],
      signalCount: 2,
      ticks: 3,
      firstTick: 1704067200 / 60,
    });
    expect(series.values.map((one) => [...one])).toEqual([
      [6, Number.NaN, 5],
      [3, Number.NaN, 1],
      [Number.NaN, 1, Number.NaN],
    ]);
  });
  it('counts a row written twice once in sums and counters, and no other row less', async () => {
    const rows = [
      ['00:00:10', 2, 100],
      ['00:00:10', 2, 100],
      ['00:00:10', 3, 104],
      ['00:00:10', 2, 100],
      ['00:00:20', 2, 104],
      ['00:01:00', 2, 110],
      ['00:01:00', 2, 110],
    ].map(([time, rain, total]) => `2024-01-01T${time}Z,${rain},${total},${rain}`);
    const file = folder.write('twice.csv', `time,rain,total,mean\n${rows.join('\n')}\n`);
    const asked = site([
      signal('rain', { aggregate: 'sum' }),
      signal('total', { aggregate: 'increment' }),
      signal('mean', { aggregate: 'mean', resolution: 0.1 }),
    ]);
    const { series, survey } = await loadHistory([file], asked, { zone: null });
    expect(series.values.map((one) => [...one])).toEqual([
      [2 + 3 + 2, 2],
      [4, 6],
      [(2 + 2 + 3 + 2 + 2) / 5, 2],
    ]);
    expect(JSON.stringify(survey)).toMatch(/rows of equal value counted once in sums/);
  });

  it('keeps a span of time, its end left out', async () => {
    const path = folder.write(
      's.csv',
      `time,a\n${Array.from({ length: 9 }, (_, n) => `${1704067200 + n * 60},${n}`).join('\n')}\n`,
    );
    const { series } = await loadHistory([path], site(['a']), {
      zone: null,
      fromMs: 1704067260_000,
      untilMs: 1704067440_000,
    });
    expect([...series.values[0]!]).toEqual([1, 2, 3]);
  });
  it('reads captured messages by payload mapping and topic filter, with their own times where they carry them', async () => {
    const lines = [
      { time: '2024-01-01T00:00:30Z', topic: 'plant/x/box', payload: '{"v":{"t":20.5},"at":"2024-01-01T00:00:05Z"}' },
      { time: '2024-01-01T00:01:30Z', topic: 'plant/x/box', payload: { v: { t: 21 }, at: 1704067265000 } },
      { time: '2024-01-01T00:02:30Z', topic: 'plant/x/box', payload: 'garbage' },
      { time: '2024-01-01T00:02:30Z', topic: 'other/thing', payload: '1' },
    ];
    const path = folder.write('m.ndjson', lines.map((line) => JSON.stringify(line)).join('\r\n'));
    const asked = site([signal('t', { topic: 'plant/+/box', payload: documentPayload('json', '/v/t', '/at') })]);
    const { series, history, survey } = await loadHistory([path], asked, { zone: null });
    expect([...series.values[0]!]).toEqual([20.5, 21]);
    expect(history.files[0]).toMatchObject({
      format: 'MQTT capture',
      columnsIgnored: ['other/thing'],
      passedOver: { 'payload of t not readable': 1 },
    });
    expect(survey.findings.map(({ kind }) => kind)).toEqual(expect.arrayContaining(['columns', 'passed-over']));
  });
});
