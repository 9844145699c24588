import { describe, expect, test } from 'vitest';
import { Aligner, type LateChange, type Placed } from '../../../runtime/ingest/align.ts';

const TICK = 1000;
const aligner = (latenessMs = 0, aggregates: ('last' | 'mean' | 'increment')[] = ['last'], rememberTicks = 10) =>
  new Aligner({ tickMs: TICK, latenessMs, aggregates, rememberTicks });

function close(a: Aligner, nowMs: number | null = null): [number, ...number[]][] {
  const out: [number, ...number[]][] = [];
  a.close(nowMs, ({ tick, values }) => out.push([tick, ...values]));
  return out;
}

function place(a: Aligner, channel: number, time: number, value: number, changes: LateChange[] = []): Placed {
  return a.place(channel, time, value, null, (change) => changes.push(change));
}

describe('by the readings alone', () => {
  test('a tick closes once a reading lies past its end by the lateness', () => {
    const a = aligner(500);
    place(a, 0, 100, 1);
    place(a, 0, 1400, 2);
    expect(close(a)).toEqual([]);
    place(a, 0, 1500, 3);
    expect(close(a)).toEqual([[0, 1]]);
    place(a, 0, 4600, 4);
    expect(close(a)).toEqual([
      [1, 3],
      [2, Number.NaN],
      [3, Number.NaN],
    ]);
  });

  test('the boundary belongs to the later tick', () => {
    const a = aligner();
    place(a, 0, 999, 1);
    place(a, 0, 1000, 2);
    place(a, 0, 2000, 3);
    expect(close(a)).toEqual([
      [0, 1],
      [1, 2],
    ]);
  });

  test('a stamp days ahead is refused once and believed when a second one agrees', () => {
    const a = aligner();
    place(a, 0, 1000, 1);
    const ahead = 3 * 24 * 3600 * 1000;
    expect(place(a, 0, ahead, 2)).toBe('future');
    expect(place(a, 0, 1500, 3)).toBe('taken');
    expect(place(a, 0, ahead + 10, 2)).toBe('taken');
  });
});

test('by the wall clock ticks close though nothing arrives, and future stamps are refused', () => {
  const a = aligner(200);
  expect(a.place(0, 5000, 1, 1500, () => {})).toBe('future');
  expect(a.place(0, 100, 1, 1500, () => {})).toBe('taken');
  expect(close(a, 1199)).toEqual([]);
  expect(close(a, 1200)).toEqual([[0, 1]]);
  expect(close(a, 3300)).toEqual([
    [1, Number.NaN],
    [2, Number.NaN],
  ]);
  expect(a.due(6200)).toBe(3);
});

describe('late readings', () => {
  test('change a remembered tick, or leave it, and are too late after that', () => {
    const changes: LateChange[] = [];
    const a = aligner(0, ['last', 'mean'], 3);
    place(a, 0, 500, 5);
    place(a, 1, 500, 1);
    place(a, 0, 1000, 6);
    close(a);
    expect(place(a, 0, 600, 7, changes)).toBe('corrected');
    expect(place(a, 0, 100, 8, changes)).toBe('late-unchanged');
    expect(place(a, 1, 700, 3, changes)).toBe('corrected');
    expect(place(a, 1, 700, 3, changes)).toBe('duplicate');
    expect(changes).toEqual([
      { tick: 0, channel: 0, value: 7 },
      { tick: 0, channel: 1, value: 2 },
    ]);
    place(a, 0, 5000, 1);
    close(a);
    expect(place(a, 0, 650, 9, changes)).toBe('too-late');
  });

  test('for ticks closed before this start are too late: their other readings are not known here', () => {
    const a = aligner();
    a.startAt(10);
    expect(place(a, 0, 9500, 1)).toBe('too-late');
    expect(place(a, 0, 10_500, 1)).toBe('taken');
  });
});

test('counters give increments across ticks, through a reset, and none for the first', () => {
  const a = aligner(0, ['increment']);
  for (const [time, value] of [
    [100, 50],
    [1100, 53],
    [1900, 60],
    [2100, 2],
    [4100, 7],
    [5200, 9],
    [6000, 9],
  ] as const)
    place(a, 0, time, value);
  expect(close(a)).toEqual([
    [0, Number.NaN],
    [1, 10],
    [2, 2],
    [3, Number.NaN],
    // What was counted since tick 2 belongs to no one tick.
    [4, Number.NaN],
    [5, 2],
  ]);
});

test('counters wrap where they end, also between a restart and the reading before it', () => {
  const options = { tickMs: 1000, latenessMs: 0, aggregates: ['increment'] as const, wraps: [65_536] };
  const before = new Aligner(options);
  for (const [time, value] of [
    [100, 65_000],
    [1100, 65_530],
    [2100, 4],
  ] as const)
    place(before, 0, time, value);
  expect(close(before)).toEqual([
    [0, Number.NaN],
    [1, 530],
  ]);
  const after = new Aligner(options);
  after.startAt(before.nextTick!);
  const open = before.openReadings();
  after.restore(open.marks);
  open.visit((channel, timeMs, value) => after.replay(channel, timeMs, value));
  for (const a of [before, after]) {
    place(a, 0, 3100, 0);
    place(a, 0, 4100, 3);
    expect(close(a)).toEqual([
      [2, 10],
      [3, 0],
    ]);
  }
});

test('what was open before a restart comes back', () => {
  const before = aligner(300, ['mean', 'increment']);
  place(before, 0, 100, 1);
  place(before, 1, 200, 10);
  place(before, 0, 1400, 2);
  close(before);
  place(before, 0, 1450, 4);
  place(before, 1, 1500, 12);
  const after = aligner(300, ['mean', 'increment']);
  after.startAt(before.nextTick!);
  const open = before.openReadings();
  after.restore(open.marks);
  open.visit((channel, timeMs, value) => after.replay(channel, timeMs, value));
  for (const a of [before, after]) place(a, 1, 2300, 13);
  expect(close(after)).toEqual([[1, 3, 2]]);
  expect(close(before)).toEqual([[1, 3, 2]]);
  for (const a of [before, after]) place(a, 0, 3400, 0);
  expect(close(after)).toEqual([[2, Number.NaN, 1]]);
});

test('closed ticks that are replayed take late readings and know redelivered ones, as if there had been no restart', () => {
  const said: [number, number, number][] = [
    [0, 100, 1],
    [1, 200, 10],
    [0, 700, 3],
    [0, 1100, 5],
    [1, 1200, 12],
    [0, 2100, 7],
  ];
  const before = aligner(0, ['mean', 'increment']);
  for (const [channel, time, value] of said) place(before, channel, time, value);
  close(before);
  const after = aligner(0, ['mean', 'increment']);
  for (const [channel, time, value] of said.slice(0, 5)) after.replay(channel, time, value);
  after.replayClose(0);
  after.replayClose(1);
  after.replay(...said[5]!);
  for (const a of [before, after]) {
    expect(a.nextTick).toBe(2);
    expect(place(a, 0, 700, 3)).toBe('duplicate');
    expect(place(a, 1, 300, 11)).toBe('late-unchanged');
    const changes: LateChange[] = [];
    expect(place(a, 0, 300, 5, changes)).toBe('corrected');
    expect(changes).toEqual([{ tick: 0, channel: 0, value: 3 }]);
    place(a, 1, 3100, 15);
    expect(close(a)).toEqual([[2, 7, Number.NaN]]);
    place(a, 0, 4100, 0);
    // Tick 2 had no counter reading: what was counted since tick 1 belongs to no one tick.
    expect(close(a)).toEqual([[3, Number.NaN, Number.NaN]]);
  }
});

test('after a gap in what is replayed, older ticks take nothing', () => {
  const a = aligner();
  a.replay(0, 100, 1);
  a.replayClose(0);
  a.replayClose(5);
  expect(place(a, 0, 300, 2)).toBe('too-late');
  expect(place(a, 0, 5100, 2)).toBe('corrected');
});

test('a flood in one tick is bounded', () => {
  const a = aligner();
  let flooded = 0;
  for (let i = 0; i < 5000; i++) if (place(a, 0, i / 10, i) === 'flood') flooded++;
  expect(flooded).toBe(5000 - 4096);
});
