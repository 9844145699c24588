/** Commands that only look: a draft from columnar files, and what is said where only the newest part was looked at. */
import { mkdirSync } from 'node:fs';
import { join } from 'node:path';
import type { DuckDBConnection } from '@duckdb/node-api';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { lookLimits, olderNote, readNewest } from '../../../trainer/history/long.ts';
import { CHUNK_TICKS, LONG_FROM } from '../../../trainer/history/long-limits.ts';
import { draftSite } from '../../../trainer/history/site-draft.ts';
import { columns, copy, LIMITS, rows, wideCsv } from './long-support.ts';
import { Folder, site } from './support.ts';

const folder = new Folder();
let connection: DuckDBConnection;
let wide = '';
beforeAll(async () => {
  connection = await columns();
  const csv = folder.write('h.csv', wideCsv(rows(400)));
  wide = `SELECT time, level AS "Level [m]", flow::INTEGER AS flow, 'x' AS note FROM read_csv('${csv}', types = {'time': 'TIMESTAMPTZ', 'level': 'DOUBLE'})`;
});
afterAll(() => {
  connection.closeSync();
  folder.remove();
});
const options = { name: 'mill', equipmentClass: 'general', zone: null };

describe('a first site file from Parquet', () => {
  it('has the columns of numbers, their units and resolution, as from text', async () => {
    const path = await copy(connection, wide, join(folder.path, 'w.parquet'));
    const { site: drafted, note } = await draftSite([path], options);
    expect(note).toBeNull();
    expect(drafted.tickMs).toBe(60_000);
    expect(drafted.signals.map(({ column, unit, resolution }) => [column, unit, resolution])).toEqual([
      ['Level [m]', 'm', 0.01],
      ['flow', '1', 1],
    ]);
  });
  it('has the names of a long one in the order they come, and those of folders', async () => {
    const long = `SELECT time, unnest(['flow', 'level']) AS signal, unnest([flow, "Level [m]"]) AS value FROM (${wide}) ORDER BY time, signal`;
    const path = await copy(connection, long, join(folder.path, 'l.parquet'));
    expect((await draftSite([path], options)).site.signals.map(({ name }) => name)).toEqual(['flow', 'level']);
    const root = join(folder.path, 'parted');
    for (const name of ['b', 'a']) {
      mkdirSync(join(root, `signal=${name}`), { recursive: true });
      await copy(connection, `SELECT time, flow AS value FROM (${wide})`, join(root, `signal=${name}`, 'x.parquet'));
    }
    expect((await draftSite([root], options)).site.signals.map(({ name }) => name)).toEqual(['a', 'b']);
  });
});

describe('histories larger than is held', () => {
  it('a draft looks at the newest part, by the tick that the first readings suggest', async () => {
    const count = LONG_FROM + CHUNK_TICKS;
    const text = Array.from(
      { length: count },
      (_, n) => `${1_700_000_000 + 60 * n},${n % 9},${n < 40_000 ? -7000 : n % 5}`,
    );
    const path = folder.write('long.csv', `time,level,flow\n${text.join('\n')}\n`);
    const whole = await draftSite([path], options);
    expect(whole.note).toBeNull();
    expect(whole.site.signals[1]?.range?.[0]).toBeLessThanOrEqual(-7000);
    const { site: drafted, note, comments } = await draftSite([path], { ...options, mostValues: 20_000 });
    expect(drafted.tickMs).toBe(60_000);
    expect(drafted.signals[1]?.range?.[0]).toBeGreaterThan(-10);
    expect(note).toMatch(
      /^This history is long: what is said here is of its newest part, from 2023-.*Z on; 48384 ticks before that/,
    );
    expect(comments['']).toContain(note);
  });
  it('say so in a sentence, nothing where all was looked at', async () => {
    const asked = site(['level', 'flow']);
    const read = async (count: number) =>
      readNewest([folder.write(`r${count}.csv`, wideCsv(rows(count)))], asked, { zone: null, limits: LIMITS });
    expect(olderNote((await read(90)).older, asked.tickMs)).toBeNull();
    expect(olderNote((await read(200)).older, asked.tickMs)).toBe(
      'This history is long: what is said here is of its newest part, from 2024-01-01T02:16:00Z on; 136 ticks before that, from 2024-01-01T00:00:00Z, were read past.',
    );
  });
  it('hold at least what a fit holds, and windows that whole chunks fit beside', () => {
    for (const count of [1, 8, 500]) {
      const { longFrom, recentTicks, chunkTicks } = lookLimits(site(Array.from({ length: count }, (_, k) => `s${k}`)));
      expect(longFrom).toBeGreaterThanOrEqual(LONG_FROM);
      expect(recentTicks).toBeLessThanOrEqual(longFrom - chunkTicks);
    }
  });
});
