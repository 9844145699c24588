/** A long history cut in two gives what the whole would have given, however its files are written, parted and ordered. */

import { gzipSync } from 'node:zlib';
import { afterAll, describe, expect, it } from 'vitest';
import { loadHistory } from '../../../trainer/history/load.ts';
import { CHUNK_TICKS, LONG_FROM, RECENT_TICKS } from '../../../trainer/history/long-limits.ts';
import { LIMITS, MINUTE, ndjson, type Row, rows, START, stream, wideCsv } from './long-support.ts';
import { Folder, signal, site } from './support.ts';

const folder = new Folder();
afterAll(() => folder.remove());
const SITE = site([signal('level', { resolution: 0.01, range: [0, 100] }), signal('flow', { resolution: 1 })]);
let number = 0;
const file = (content: string | Uint8Array, name = `h${number++}.csv`): string => folder.write(name, content);
/** The same rows laid on ticks as one. */
const whole = async (all: readonly Row[], asked = SITE): Promise<number[][]> =>
  (await loadHistory([file(wideCsv(all))], asked, { zone: null })).series.values.map((one) => [...one]);

describe('where a history is cut', () => {
  it('leaves one of the longest short length as it is', async () => {
    const all = rows(LIMITS.longFrom);
    const short = await stream([file(wideCsv(all))], SITE);
    expect(short.loaded.older).toBeNull();
    expect(short.sink.chunks).toEqual([]);
    const plain = await loadHistory([file(wideCsv(all))], SITE, { zone: null });
    expect(short.loaded.series.digest).toEqual(plain.series.digest);
    expect(JSON.stringify(short.loaded.survey.findings)).toBe(JSON.stringify(plain.survey.findings));
  });
  it('hands on chunks that begin at multiples of their length from the first tick, and keeps the newest ticks', async () => {
    for (const count of [97, 100, 128, 257, 300]) {
      const all = rows(count);
      const { loaded, sink, values } = await stream([file(wideCsv(all))], SITE);
      const older = count - LIMITS.recentTicks;
      expect(loaded.series.ticks).toBe(LIMITS.recentTicks);
      expect(sink.chunks.map(({ firstTick }) => firstTick - START / MINUTE)).toEqual(
        Array.from({ length: Math.ceil(older / 16) }, (_, k) => 16 * k),
      );
      expect(loaded.older).toMatchObject({ ticks: older, rows: count, outOfOrder: 0, chunks: sink.chunks.length });
      expect(loaded.older?.toTick).toBe(loaded.series.firstTick);
      expect(values).toEqual(await whole(all));
      expect(loaded.older?.readings).toEqual([0, 1].map((c) => sink.channel(c).filter((v) => !Number.isNaN(v)).length));
    }
  });
  it('has sizes that fit each other', () => {
    expect(LONG_FROM - RECENT_TICKS).toBeGreaterThanOrEqual(CHUNK_TICKS);
  });
});

describe('one long history, many ways to write it', () => {
  it('wide, long, packed, in any order of files, parted by signal: the same ticks', async () => {
    const all = rows(300);
    const expected = await whole(all);
    const half = [all.slice(0, 170), all.slice(170)] as const;
    const bySignal = (name: 'level' | 'flow'): string =>
      [`time,${name}`, ...all.map((r) => `${new Date(r.time).toISOString()},${r[name] ?? ''}`)].join('\n');
    const ways: string[][] = [
      [file(gzipSync(wideCsv(all)))],
      [file(ndjson(all))],
      [file(wideCsv(half[1])), file(wideCsv(half[0]))],
      [file(bySignal('flow')), file(bySignal('level'))],
      [file(wideCsv(half[1])), file(ndjson(half[0]))],
    ];
    for (const paths of ways) {
      const { values, loaded } = await stream(paths, SITE);
      expect(values).toEqual(expected);
      expect(loaded.older?.outOfOrder).toBe(0);
    }
  });
  it('files that overlap: rows of equal times are joined as in one file', async () => {
    const all = rows(300);
    const paths = [file(wideCsv(all.slice(100))), file(wideCsv(all.slice(0, 160)))];
    expect((await stream(paths, SITE)).values).toEqual(await whole(all));
  });
  it('takes the part asked for', async () => {
    const all = rows(400);
    const span = { fromMs: START + 37 * MINUTE, untilMs: START + 350 * MINUTE };
    const { values, loaded } = await stream([file(wideCsv(all))], SITE, span);
    expect(values).toEqual(await whole(all.slice(37, 350)));
    expect(loaded.older?.fromTick).toBe(START / MINUTE + 37);
  });
});

describe('rows out of order', () => {
  it('within the window are sorted and counted', async () => {
    const all = rows(300);
    const mixed = all.map((_, n) => all[n % 2 === 0 ? Math.min(n + 1, 299) : n - 1] as Row);
    const { values, loaded } = await stream([file(wideCsv(mixed))], SITE);
    expect(values).toEqual(await whole(all));
    expect(loaded.older?.outOfOrder).toBe(150);
  });
  it('too far back are refused with their line, and what to do', async () => {
    const all = rows(300);
    const late = [...all.slice(0, 250), all[20] as Row, ...all.slice(250)];
    await expect(stream([file(wideCsv(late), 'late.csv')], SITE)).rejects.toThrow(
      /late\.csv:252: expected times in order, or at most 1 h 4 min behind the newest \(2024-01-01T04:09:00Z\), got 2024-01-01T00:20:00Z; .*sort the rows of this file by time/,
    );
  });
});

describe('the rules of ticks hold for what is older', () => {
  it('means, sums of rows written twice, counters across chunks, ranges', async () => {
    const asked = site([
      signal('level', { aggregate: 'mean', range: [0, 8], resolution: 0.5 }),
      signal('flow', { aggregate: 'increment', resolution: 1 }),
    ]);
    const all = rows(600).map((r, n) => ({ ...r, time: START + n * 30_000, flow: n * 3 }));
    const twice = [...all.slice(0, 41), all[40] as Row, ...all.slice(41)];
    const { values } = await stream([file(wideCsv(twice))], asked);
    const expected = await whole(twice, asked);
    // The first tick of the newest part has no counter reading before it, as that of any history.
    const cut = 300 - LIMITS.recentTicks;
    expected[1]![cut] = Number.NaN;
    values[1]![cut] = Number.NaN;
    expect(values).toEqual(expected);
  });
  it('without a declared range passes over what lies a hundred spreads away', async () => {
    const plain = site(['level', 'flow']);
    const all = rows(600).map((r, n) => (n === 300 ? { ...r, flow: 1e12 } : r));
    const { values } = await stream([file(wideCsv(all))], plain);
    expect(values[1]![300]).toBeNaN();
    expect(values[1]![299]).toBe(all[299]!.flow);
  });
  it('time that must not teach, by date and by what a signal says, across chunks', async () => {
    const asked = site([signal('level', { resolution: 0.01, range: [0, 100] }), signal('flow', { resolution: 1 })], {
      exclude: [
        { fromMs: START + 10 * MINUTE, toMs: START + 40 * MINUTE, reason: 'overhaul', signals: null },
        {
          when: { signal: 'flow', is: 'equals', level: 99 },
          ...{ beforeMs: 7 * MINUTE, afterMs: 30 * MINUTE, reason: 'local', signals: null },
        },
      ],
    });
    const isLocal = (n: number): boolean => (n >= 70 && n < 120) || n === 161 || (n >= 225 && n < 240);
    const all = rows(300).map((r, n) => ({ ...r, flow: isLocal(n) ? 99 : r.flow }));
    const { sink, loaded } = await stream([file(wideCsv(all))], asked);
    const once = await loadHistory([file(wideCsv(all))], asked, { zone: null });
    const flags = [...sink.chunks.flatMap(({ excluded }) => excluded ?? []), ...loaded.series.excluded!.isExcluded];
    expect(flags).toEqual([...once.series.excluded!.isExcluded]);
    expect(loaded.older?.excludedTicks).toBe(flags.slice(0, 236).reduce((sum, flag) => sum + flag, 0));
  });
});
