/**
 * Packed text: gzip (RFC 1952) and Zstandard (RFC 8878), whole and cut off, short and long, and refusals that name the
 * same lines as in plain text. Frames made by the library that ships with the columnar one; their layout by the RFC.
 */
import { readFileSync } from 'node:fs';
import { join } from 'node:path';
import { gzipSync } from 'node:zlib';
import type { DuckDBConnection } from '@duckdb/node-api';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { engineRefusal } from '../../../trainer/history/columns-engine.ts';
import { loadHistory } from '../../../trainer/history/load.ts';
import { columns, rows, stream, wideCsv } from './long-support.ts';
import { Folder, site } from './support.ts';

const folder = new Folder();
let connection: DuckDBConnection;
beforeAll(async () => {
  connection = await columns();
});
afterAll(() => {
  connection.closeSync();
  folder.remove();
});

const SITE = site(['level', 'flow']);
let number = 0;

/** Packs lines of text. */
async function zstd(text: string): Promise<string> {
  const path = join(folder.path, `z${number++}.csv.zst`);
  await connection.run('CREATE OR REPLACE TABLE lines (n INTEGER, line VARCHAR)');
  const all = text.replace(/\n$/, '').split('\n');
  const appender = await connection.createAppender('lines');
  all.forEach((line, n) => {
    appender.appendInteger(n);
    appender.appendVarchar(line);
    appender.endRow();
  });
  appender.closeSync();
  await connection.run(
    `COPY (SELECT line FROM lines ORDER BY n) TO '${path}' (FORMAT csv, HEADER false, QUOTE '', ESCAPE '', DELIMITER '', COMPRESSION zstd)`,
  );
  return path;
}

const refusal = (path: string): Promise<string> =>
  loadHistory([path], SITE, { zone: null }).then(
    () => 'accepted',
    (cause: Error) => cause.message,
  );

describe('Zstandard', () => {
  it('reads the same as plain text: quoted line breaks, blank lines, several frames, short and long', async () => {
    for (const count of [60, 400]) {
      const text = wideCsv(rows(count))
        .replace('time,level,flow', 'time,level,"flow"')
        .replaceAll('\n2024-01-01T00:1', '\n\n2024-01-01T00:1');
      const packed = await zstd(text);
      const expected = await stream([folder.write(`plain${count}.csv`, text)], SITE);
      const { values, loaded } = await stream([packed], SITE);
      expect(values).toEqual(expected.values);
      expect(loaded.history.files[0]).toMatchObject({ format: 'wide CSV', rows: count });
      const half = text.indexOf('\n', text.length >> 1) + 1;
      const frames = [readFileSync(await zstd(text.slice(0, half))), readFileSync(await zstd(text.slice(half)))];
      // A frame to be skipped (RFC 8878 section 3.1.2) between the two.
      const skipped = Buffer.from([0x51, 0x2a, 0x4d, 0x18, 3, 0, 0, 0, 1, 2, 3]);
      const joined = folder.write(`frames${count}.zst`, Buffer.concat([frames[0]!, skipped, frames[1]!]));
      expect((await stream([joined], SITE)).values).toEqual(expected.values);
    }
  });
  it('names the line as in plain text, blank ones counted', async () => {
    const text = 'time,level,flow\n\n\n2024-01-01T00:00:00Z,1,2\n2024-01-01T00:01:00Z,bad,2\n';
    expect(await refusal(await zstd(text))).toMatch(/\.csv\.zst:5, column "level": expected a number.*got "bad"/);
  });
  it('is refused cut off at any place, in one sentence', async () => {
    const bytes = readFileSync(await zstd(wideCsv(rows(3000))));
    for (const share of [0.01, 0.3, 0.9, 0.9999]) {
      const cut = folder.write('cut.zst', bytes.subarray(0, Math.floor(bytes.length * share)));
      expect(await refusal(cut)).toBe(
        `${cut}: expected a whole Zstandard file, got a damaged or cut-off one; copy or export it again`,
      );
    }
    const more = folder.write('more.zst', Buffer.concat([bytes, Buffer.from('rest')]));
    expect(await refusal(more)).toMatch(/expected a whole Zstandard file/);
  });
});

describe('gzip', () => {
  it('is refused cut off, also where the history is long, and nothing is handed on as if it were whole', async () => {
    const cut = folder.write('cut.csv.gz', gzipSync(wideCsv(rows(5000))).subarray(0, -200));
    expect(await refusal(cut)).toMatch(
      /expected a whole gzip file, got a damaged one \(unexpected end of file\); copy or export it again$/,
    );
    await expect(stream([cut], SITE)).rejects.toThrow(/expected a whole gzip file/);
  });
});

describe('what the columnar library says', () => {
  it('comes through in one sentence of ours', () => {
    const said = (text: string): string => engineRefusal('x.parquet', new Error(text)).message;
    expect(said('IO Error: Could not write file "/out/tmp": No space left on device\n\nLINE 1: SELECT')).toBe(
      'x.parquet: cannot be sorted by time: the disk is full; clear some space',
    );
    expect(said('Out of Memory Error: failed to allocate')).toMatch(
      /^x\.parquet: expected parts that fit into 512MB.*smaller row groups$/,
    );
    expect(said('Invalid Input Error: No magic bytes found\n\nLINE 1: SELECT * FROM')).not.toMatch(/LINE|SELECT|magic/);
  });
});
