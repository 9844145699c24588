/** Extents are held against files whose rows and times are known, plain, packed and Parquet. */
import { mkdirSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { gzipSync } from 'node:zlib';
import { DuckDBInstance } from '@duckdb/node-api';
import { describe, expect, it } from 'vitest';
import { parseSite } from '../../../protocol/index.ts';
import { historyExtent } from '../../../trainer/sizing/history-extent.ts';
import { testFolder } from '../../support/folder.ts';

const NAMES = ['level', 'flow'];
const site = parseSite(
  `site: mill-lane\ntime_zone: UTC\ntick: 1min\nhorizon: 6\nsignals:\n${NAMES.map((one) => `  - {name: ${one}}\n`).join('')}`,
);
const FIRST_MS = Date.UTC(2024, 0, 1);
const ROWS = 60_000;

const timeOf = (n: number): string => new Date(FIRST_MS + 60_000 * n).toISOString();
const readingOf = (n: number, c: number): string => (10 + c + Math.sin(n / (7 + c))).toFixed(3);
const wide = (rows: number, from = 0): string =>
  `time,${NAMES.join(',')}\n${Array.from({ length: rows }, (_, n) => `${timeOf(from + n)},${readingOf(n, 0)},${readingOf(n, 1)}\n`).join('')}`;

function fileOf(name: string, contents: string | Uint8Array): string {
  const path = join(testFolder(), name);
  writeFileSync(path, contents);
  return path;
}

const within = (value: number, of: number, share: number): void => expect(Math.abs(value / of - 1)).toBeLessThan(share);

describe('rows, readings and ticks', () => {
  it('of a small file are exact', async () => {
    const extent = await historyExtent([fileOf('a.csv', wide(500))], site, null, {});
    expect(extent).toMatchObject({ rows: 500, readings: 1000, ticks: 500, isExact: true, fromMs: FIRST_MS });
  });

  it('of a large plain file: rows within 1 %, ticks to the tick, since both its ends are seen', async () => {
    const extent = await historyExtent([fileOf('a.csv', wide(ROWS))], site, null, {});
    expect(extent).toMatchObject({ ticks: ROWS, fromMs: FIRST_MS, isExact: false });
    within(extent.rows, ROWS, 0.01);
    within(extent.readings, 2 * ROWS, 0.01);
  });

  it('of a packed one within 1 %, from its trailer and its beginning', async () => {
    const text = wide(ROWS);
    const extent = await historyExtent([fileOf('a.csv.gz', gzipSync(text))], site, null, {});
    expect(extent.textBytes).toBe(text.length);
    within(extent.rows, ROWS, 0.01);
    within(extent.ticks, ROWS, 0.01);
  });

  it('of a packed one of several members, whose trailer speaks of the last alone, within 10 %', async () => {
    const members = [wide(ROWS), wide(10).split('\n').slice(1).join('\n')].map((text) => gzipSync(text));
    const extent = await historyExtent([fileOf('a.csv.gz', Buffer.concat(members))], site, null, {});
    within(extent.rows, ROWS, 0.1);
  });

  it('of long rows count each reading once', async () => {
    const rows = Array.from({ length: 30_000 }, (_, n) =>
      NAMES.map((name, c) => `${timeOf(n)},${name},${readingOf(n, c)}\n`).join(''),
    );
    const extent = await historyExtent([fileOf('a.csv', `time,signal,value\n${rows.join('')}`)], site, null, {});
    within(extent.rows, 60_000, 0.01);
    within(extent.readings, 60_000, 0.01);
    expect(extent.ticks).toBe(30_000);
  });

  it('of a Parquet file are what it says of itself', async () => {
    const path = join(testFolder(), 'a.parquet');
    const instance = await DuckDBInstance.create(':memory:');
    const connection = await instance.connect();
    await connection.run(
      `COPY (SELECT TIMESTAMP '2024-01-01' + n * INTERVAL 1 MINUTE AS time, n % 7 / 1.0 AS level, n % 5 / 1.0 AS flow FROM range(${ROWS}) AS t(n)) TO '${path}'`,
    );
    connection.closeSync();
    instance.closeSync();
    const extent = await historyExtent([path], site, null, {});
    expect(extent).toMatchObject({
      rows: ROWS,
      readings: 2 * ROWS,
      ticks: ROWS,
      textBytes: 0,
      isExact: true,
      fromMs: FIRST_MS,
    });
  });
});

describe('several files', () => {
  it('make one span; a folder stands for its files', async () => {
    const folder = join(testFolder(), 'logs');
    mkdirSync(folder);
    writeFileSync(join(folder, 'b.csv'), wide(100, 400));
    writeFileSync(join(folder, 'a.csv'), wide(100));
    const extent = await historyExtent([folder], site, null, {});
    expect(extent).toMatchObject({ files: 2, rows: 200, ticks: 500, isExact: true });
  });

  it('are cut by --from and --until', async () => {
    const path = fileOf('a.csv', wide(1000));
    const span = { fromMs: FIRST_MS + 250 * 60_000, untilMs: FIRST_MS + 500 * 60_000 };
    const extent = await historyExtent([path], site, null, span);
    within(extent.rows, 250, 0.01);
    within(extent.ticks, 250, 0.01);
    expect((await historyExtent([path], site, null, { fromMs: FIRST_MS + 9e9 })).ticks).toBe(0);
  });
});

describe('refused as reading would refuse it', () => {
  it.each([
    ['x.csv', '', /x\.csv: expected a header line and readings, got an empty file/],
    ['x.csv.gz', gzipSync(wide(50)).fill(7, 20), /x\.csv\.gz: expected a whole gzip file, got a damaged one/],
    ['x.csv', 'a'.repeat(3_000_000), /x\.csv: expected lines of text, got none within its first/],
    ['x.csv', wide(5).replace('2024', '24'), /x\.csv:2.*expected a time in ISO 8601/],
    ['x.parquet', 'PAR1 and no more', /x\.parquet: expected a whole Parquet file/],
  ])('%s', async (name, contents, words) => {
    await expect(historyExtent([fileOf(name, contents)], site, null, {})).rejects.toThrow(words);
  });
});
