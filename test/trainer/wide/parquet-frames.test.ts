/** Frames out of Parquet files, which DuckDB writes for the test. */
import { copyFileSync, mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { DuckDBInstance } from '@duckdb/node-api';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { openParquetFrames } from '../../../trainer/wide/parquet-frames.ts';
import { readFrames } from '../../support/read-frames.ts';

const folder = mkdtempSync(join(tmpdir(), 'frames-'));
let instance: DuckDBInstance;
beforeAll(async () => {
  instance = await DuckDBInstance.create(':memory:');
});
afterAll(() => {
  instance.closeSync();
  rmSync(folder, { recursive: true });
});

async function written(select: string, options = ''): Promise<string> {
  const path = join(folder, 'a.parquet');
  const connection = await instance.connect();
  await connection.run(`COPY (${select}) TO '${path}' (FORMAT parquet${options})`);
  connection.closeSync();
  return path;
}

const START = "TIMESTAMP '2030-01-01 00:00:00'";

describe('frames', () => {
  test('out of a column of lists, with times', async () => {
    const path = await written(
      `SELECT ${START} + to_milliseconds(40 * i) AS t, [i, i + 0.5, -i]::DOUBLE[] AS pixels FROM range(5000) r(i) ORDER BY i`,
      ', ROW_GROUP_SIZE 2048',
    );
    const source = await openParquetFrames(path);
    expect(source).toMatchObject({ frameLength: 3, count: 5000, startMs: Date.UTC(2030, 0, 1), tickMs: 40 });
    const frames = await readFrames(source);
    expect(frames).toEqual(Array.from({ length: 5000 }, (_, i) => [i, i + 0.5, 0 - i]));
  });

  test('out of a column a number, in the order of the columns; times told by hand', async () => {
    const path = await written('SELECT i::INTEGER AS b2, (i / 4)::FLOAT AS b1 FROM range(3) r(i)');
    const source = await openParquetFrames(path, { startMs: 7, tickMs: 1000 });
    expect(source).toMatchObject({ frameLength: 2, count: 3, startMs: 7, tickMs: 1000 });
    expect(await readFrames(source)).toEqual([
      [0, 0],
      [1, 0.25],
      [2, 0.5],
    ]);
  });

  test('out of fixed-size arrays', async () => {
    expect(await readFrames(await openParquetFrames(await written('SELECT [1, 2]::FLOAT[2] AS v')))).toEqual([[1, 2]]);
  });
});

describe('what is refused', () => {
  test.each([
    [
      'lists of other lengths',
      'SELECT [1.0, 2] AS v UNION ALL SELECT [1.0]',
      'expected 2 numbers in every row, as in the first, got 1 in row 1',
    ],
    [
      'a number that is not there',
      'SELECT [1.0, 2] AS v UNION ALL SELECT [1.0, NULL]',
      'expected a number, got none in row 1 (from 0)',
    ],
    [
      'a bin that is not there',
      'SELECT 1.0 AS a UNION ALL SELECT NULL',
      'column "a": expected a number, got none in row 1',
    ],
    ['a number that is none', "SELECT ['NaN'::FLOAT] AS v", 'got NaN at number 0 of frame 0'],
    [
      'a row without a list',
      'SELECT [1.0] AS v UNION ALL SELECT NULL',
      'expected 1 numbers in every row, as in the first, got 0 in row 1',
    ],
    ['two lists', 'SELECT [1.0] AS a, [2.0] AS b', 'expected one column with a list of numbers'],
    ['no numbers', "SELECT 'a' AS name", 'got "name VARCHAR"'],
    ['no rows', 'SELECT 1.0 AS a WHERE false', 'expected frames, got no rows'],
    [
      'missing frames',
      `SELECT ${START} + to_milliseconds(CASE WHEN i > 5 THEN 40 * i + 1000 ELSE 40 * i END) AS t, 1.0 AS a FROM range(10) r(i)`,
      'cut it where frames are missing',
    ],
    ['times out of order', `SELECT ${START} + to_milliseconds(-40 * i) AS t, 1.0 AS a FROM range(10) r(i)`, 'in order'],
  ])('%s', async (_, select, message) => {
    const path = await written(select);
    await expect(openParquetFrames(path).then(readFrames)).rejects.toThrow(message);
  });

  test('row groups that would not fit', async () => {
    const path = await written('SELECT range(2000)::FLOAT[] AS v FROM range(40)');
    await expect(openParquetFrames(path, {}, 80_000)).rejects.toThrow(
      'row groups of at most 10 frames, since a frame has 2000 numbers, got 40',
    );
  });

  test('numbers that float32 cannot hold, also so far from the beginning that the library says nothing', async () => {
    const large = (row: number, rows: number): string =>
      `SELECT [CASE WHEN i = ${row} THEN 1e300 ELSE 1 END]::DOUBLE[] AS v FROM range(${rows}) r(i)`;
    for (const select of [large(3, 10), large(100_000, 120_000)]) {
      const path = await written(select, ', ROW_GROUP_SIZE 2048');
      await expect(openParquetFrames(path).then(readFrames)).rejects.toThrow(
        `${path}: expected numbers that float32 can hold, up to 3.4e38, got a larger one; scale the frames`,
      );
    }
  });
});

describe('files that are none, or damaged', () => {
  const WHOLE = 'SELECT [i, i + 1]::FLOAT[] AS v FROM range(5000) r(i)';
  const changed = async (change: (bytes: Buffer) => Uint8Array): Promise<string> => {
    const path = await written(WHOLE, ', COMPRESSION zstd');
    writeFileSync(path, change(readFileSync(path)));
    return path;
  };
  const noise = (bytes: Buffer, from: number, count: number): Buffer => {
    for (let k = from; k < from + count; k++) bytes[k] = (bytes[k]! * 7 + 13) & 255;
    return bytes;
  };

  test.each<[string, (bytes: Buffer) => Uint8Array, RegExp]>([
    ['cut short', (bytes) => bytes.subarray(0, bytes.length >> 1), /got one without its end; it was cut short: fetch/],
    [
      'its end alone',
      (bytes) => bytes.subarray(bytes.length >> 1),
      /expected a Parquet file, got another kind of file/,
    ],
    ['both marks and no more', (bytes) => bytes.subarray(0, 4), /got one without its end/],
    ['empty', () => new Uint8Array(0), /expected a recording of frames, got an empty file; fetch it again/],
    ['text', () => Buffer.from('not a table'), /expected a Parquet file, got another kind of file; check the path/],
    ['a damaged footer', (bytes) => noise(bytes, bytes.length - 200, 150), /got a damaged one; fetch it again/],
    ['damaged numbers', (bytes) => noise(bytes, bytes.length >> 1, 200), /got a damaged one; fetch it again/],
  ])('%s', async (_, change, message) => {
    const path = await changed(change);
    const refused = await openParquetFrames(path)
      .then(readFrames)
      .then(
        () => 'accepted',
        (error: Error) => error.message,
      );
    expect(refused).toMatch(message);
    // One sentence of ours, none of the library's.
    expect(refused).toMatch(/^\S+a\.parquet: expected [^"]*; [^"]*$/);
  });

  test('none, and a folder', async () => {
    await expect(openParquetFrames(join(folder, 'none'))).rejects.toThrow('got nothing: there is no such file');
    await expect(openParquetFrames(folder)).rejects.toThrow('got a folder; name the files in it');
  });
});

test('a name with a star is that file alone', async () => {
  const path = await written('SELECT [1.0, 2] AS v');
  copyFileSync(path, join(folder, 's*.parquet'));
  copyFileSync(path, join(folder, 'star.parquet'));
  expect(await readFrames(await openParquetFrames(join(folder, 's*.parquet')))).toEqual([[1, 2]]);
});
