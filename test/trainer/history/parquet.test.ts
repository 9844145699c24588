/**
 * Parquet files: every kind of time and number, wide and long, by folders; the same series as from text. Written here by
 * the library that reads them, for want of a second one; what the kinds mean is the Apache Parquet format's, LogicalTypes.md
 * (TIMESTAMP with isAdjustedToUTC or without, DATE, DECIMAL, ENUM).
 */
import { mkdirSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import type { DuckDBConnection } from '@duckdb/node-api';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { loadHistory } from '../../../trainer/history/load.ts';
import { columns, copy, LIMITS, ndjson, rows, START, stream, wideCsv } from './long-support.ts';
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
const parquet = (question: string, how?: string, name = `p${number++}.parquet`): Promise<string> =>
  copy(connection, question, join(folder.path, name), how);
const load = (paths: string | string[], asked = SITE, zone: string | null = null) =>
  loadHistory(typeof paths === 'string' ? [paths] : paths, asked, { zone });
const digest = async (paths: string | string[], asked = SITE, zone: string | null = null): Promise<string> =>
  Buffer.from((await load(paths, asked, zone)).series.digest).toString('hex');
const refusal = (path: string, asked = SITE): Promise<string> =>
  load(path, asked).then(
    () => 'accepted',
    (cause: Error) => cause.message,
  );

/** The rows of a CSV file as a question, times as instants. */
const ofCsv = (path: string, time = 'time'): string =>
  `SELECT ${time} AS time, level, flow FROM read_csv('${path}', types = {'time': 'TIMESTAMPTZ', 'level': 'DOUBLE', 'flow': 'INTEGER'})`;

describe('the same readings as text and as columns', () => {
  it('give the same series, short and long, wide and by signal, packed in any way', async () => {
    for (const count of [80, 300]) {
      const all = rows(count);
      const csv = folder.write(`same${count}.csv`, wideCsv(all));
      const wide = ofCsv(csv);
      const long = `SELECT time, 'level' AS signal, level AS value FROM (${wide}) UNION ALL SELECT time, 'flow', flow::DOUBLE FROM (${wide}) ORDER BY time`;
      const paths = [
        await parquet(wide),
        await parquet(wide, 'FORMAT parquet, COMPRESSION zstd, ROW_GROUP_SIZE 2048'),
        await parquet(long),
        await copy(
          connection,
          `SELECT * FROM read_csv('${csv}', all_varchar = true)`,
          join(folder.path, `z${count}.csv.zst`),
          'FORMAT csv, COMPRESSION zstd',
        ),
        folder.write(`same${count}.ndjson`, ndjson(all)),
      ];
      const expected = await stream([csv], SITE);
      expect(expected.loaded.older === null).toBe(count < LIMITS.longFrom);
      for (const path of paths) {
        const { loaded, values } = await stream([path], SITE);
        expect(values).toEqual(expected.values);
        expect(loaded.series.digest).toEqual(expected.loaded.series.digest);
        expect(loaded.older?.digest).toEqual(expected.loaded.older?.digest);
      }
    }
  });
  it('rows in no order are sorted by time where the history is long', async () => {
    const csv = folder.write('mixed.csv', wideCsv(rows(600)));
    const mixed = await parquet(`SELECT * FROM (${ofCsv(csv)}) ORDER BY hash(time)`);
    const bySignal = await parquet(
      `SELECT time, unnest(['level', 'flow']) AS signal, unnest([level, flow::DOUBLE]) AS value FROM (${ofCsv(csv)}) ORDER BY signal, time`,
    );
    const expected = await stream([csv], SITE);
    for (const path of [mixed, bySignal]) {
      const { values, loaded } = await stream([path], SITE);
      expect(values).toEqual(expected.values);
      expect(loaded.older?.digest).toEqual(expected.loaded.older?.digest);
    }
  });
});

describe('kinds of time', () => {
  const plain = `time,level,flow
2024-03-30T22:59:59.500Z,1.5,2
2024-03-31T00:30:00.250Z,2.5,3
2024-03-31T01:30:00Z,3.5,4
`;
  const csv = (): string => folder.write('times.csv', plain);
  it.each([
    ['an instant', 'time'],
    ['text', "strftime(time AT TIME ZONE 'UTC', '%Y-%m-%dT%H:%M:%S.%gZ')"],
    ['milliseconds since 1970', 'epoch_ms(time)'],
    ['seconds since 1970, with a fraction', 'epoch(time)'],
    ['a decimal of seconds', 'epoch(time)::DECIMAL(18, 3)'],
    [
      'dictionary of texts',
      "strftime(time AT TIME ZONE 'UTC', '%Y-%m-%dT%H:%M:%S.%gZ')::ENUM('2024-03-30T22:59:59.500Z', '2024-03-31T00:30:00.250Z', '2024-03-31T01:30:00.000Z')",
    ],
  ])('%s', async (_, time) => {
    expect(await digest(await parquet(ofCsv(csv(), time)))).toBe(await digest(csv()));
  });
  it.each(['TIMESTAMP', 'TIMESTAMP_MS', 'TIMESTAMP_NS'])(
    '%s without a zone is local time, as in text',
    async (type) => {
      const local = folder.write('local.csv', plain.replaceAll('Z', ''));
      const path = await parquet(ofCsv(csv(), `(time AT TIME ZONE 'UTC')::${type}`));
      for (const zone of ['UTC', 'Europe/Berlin', '-05:00'])
        expect(await digest(path, SITE, zone)).toBe(await digest(local, SITE, zone));
      const loaded = await load(path, SITE, 'Europe/Berlin');
      expect(loaded.history.clockChanges).toHaveLength(0);
      expect(loaded.history.zone).toBe('Europe/Berlin');
      expect(loaded.history.files[0]).toMatchObject({ format: 'wide Parquet', rows: 3, timeKind: 'ISO without zone' });
    },
  );
  it('seconds, and dates at midnight', async () => {
    const days = 'time,level,flow\n2024-03-30,1,2\n2024-03-31,2,3\n2024-04-01,3,4\n';
    const text = folder.write('days.csv', days);
    const question = `SELECT time::DATE AS time, level, flow FROM read_csv('${text}')`;
    const asked = site(['level', 'flow'], { tickMs: 3_600_000 });
    const zone = 'Europe/Berlin';
    expect(await digest(await parquet(question), asked, zone)).toBe(await digest(text, asked, zone));
    const seconds = question.replace('time::DATE', 'time::TIMESTAMP_S');
    expect(await digest(await parquet(seconds), asked, zone)).toBe(await digest(text, asked, zone));
  });
});

describe('kinds of number', () => {
  it.each([
    'TINYINT',
    'UTINYINT',
    'SMALLINT',
    'BIGINT',
    'UBIGINT',
    'FLOAT',
    'DOUBLE',
    'DECIMAL(9, 3)',
    'DECIMAL(30, 2)',
    'HUGEINT',
  ])('%s', async (type) => {
    const path = await parquet(
      `SELECT to_timestamp(1704067200 + 60 * range) AS time, (range % 7)::${type} AS level, CASE WHEN range = 3 THEN NULL ELSE (range % 5)::${type} END AS flow FROM range(10)`,
    );
    const { series, history } = await load(path);
    expect([...series.values[0]!]).toEqual([0, 1, 2, 3, 4, 5, 6, 0, 1, 2]);
    expect([...series.values[1]!]).toEqual([0, 1, 2, Number.NaN, 4, 0, 1, 2, 3, 4]);
    expect(history.files[0]!.missingMarks).toEqual({ '': 1 });
  });
  it('yes and no are 1 and 0, and 32-bit readings lie on their decimals', async () => {
    const path = await parquet(
      'SELECT to_timestamp(1704067200 + 60 * range) AS time, range % 2 = 1 AS level, (range / 10.0)::FLOAT AS flow FROM range(40)',
    );
    const { series } = await load(path);
    expect([...series.values[0]!.subarray(0, 3)]).toEqual([0, 1, 0]);
    expect([...series.values[1]!.subarray(0, 4)]).toEqual([0, 0.1, 0.2, 0.3]);
  });
});

describe('folders and names', () => {
  it('reads hive-style folders as one history, other sites left out, keys passed over', async () => {
    const all = rows(300);
    const csv = folder.write('hive.csv', wideCsv(all));
    const root = join(folder.path, "it's [a] folder*");
    const part = async (below: string, from: number, to: number, where = 'true'): Promise<void> => {
      mkdirSync(join(root, below), { recursive: true });
      await copy(
        connection,
        `SELECT * FROM (${ofCsv(csv)}) WHERE ${where} OFFSET ${from} LIMIT ${to - from}`,
        join(root, below, 'data.parquet'),
      );
    };
    await part('site=test/year=2024/month=02', 200, 300);
    await part('site=test/year=2024/month=01', 0, 200);
    await part('site=other/year=2024/month=01', 0, 300);
    writeFileSync(join(root, '_SUCCESS'), '');
    writeFileSync(join(root, 'notes.md'), 'no data');
    const expected = await stream([csv], SITE);
    for (const path of [root, join(root, 'site=test', '**', '*.parquet'), join(root, 'site=*', 'year=202?')]) {
      const { values, loaded } = await stream([path], SITE);
      expect(values).toEqual(expected.values);
      expect(loaded.history.files).toHaveLength(2);
      expect(loaded.history.files.flatMap(({ columnsIgnored }) => columnsIgnored)).toEqual([]);
    }
    await expect(load(root, { ...SITE, site: 'third' })).rejects.toThrow(/got only those of other sites than "third"/);
  });
  it('takes the signal from a folder, signal=NAME', async () => {
    const csv = folder.write('sig.csv', wideCsv(rows(50)));
    const root = join(folder.path, 'by-signal');
    for (const name of ['level', 'flow']) {
      mkdirSync(join(root, `signal=${name}`), { recursive: true });
      await copy(
        connection,
        `SELECT time, ${name} AS value FROM (${ofCsv(csv)})`,
        join(root, `signal=${name}`, 'a.parquet'),
      );
    }
    expect(await digest(root)).toBe(await digest(csv));
  });
  it('names what it passes over: columns, and signals of a long file', async () => {
    const extra = await parquet(
      "SELECT to_timestamp(1704067200 + 60 * range) AS time, range AS level, range AS flow, 'x' AS note FROM range(5)",
    );
    expect((await load(extra)).history.files[0]!.columnsIgnored).toEqual(['note']);
    const long = await parquet(
      "SELECT to_timestamp(1704067200 + 60 * range) AS time, ['level', 'flow', 'spare'][1 + range % 3] AS signal, range AS value FROM range(9)",
    );
    const read = (await load(long)).history.files[0]!;
    expect(read).toMatchObject({
      format: 'long Parquet',
      rows: 9,
      columnsIgnored: ['spare'],
      timeKind: 'ISO with zone',
    });
  });
});

describe('a Parquet file that is not right', () => {
  const at = (select: string, count = 5): Promise<string> => parquet(`SELECT ${select} FROM range(${count})`);
  const TIME = 'to_timestamp(1704067200 + 60 * range) AS time';
  it('names the column whose type is wrong, what was expected and what it is', async () => {
    expect(await refusal(await at(`${TIME}, 'high' AS level, range AS flow`))).toMatch(
      /p\d+\.parquet, column "level": expected numbers, got text; write the readings as a column of numbers/,
    );
    expect(await refusal(await at(`${TIME}, [range] AS level, range AS flow`))).toMatch(
      /column "level": expected numbers, got lists/,
    );
    expect(await refusal(await at('range % 2 = 0 AS time, range AS level, range AS flow'))).toMatch(
      /column "time": expected times \(timestamps, dates, ISO 8601 text, or seconds or milliseconds since 1970\), got yes or no; name the column of times "time"/,
    );
    expect(await refusal(await at(`${TIME}, range AS signal, range AS value`))).toMatch(
      /column "signal": expected names of signals, got numbers/,
    );
    expect(await refusal(await at(TIME))).toMatch(
      /expected a column of times and at least one of readings, got "time" alone/,
    );
  });
  it('names the likeliest column meant, rows that have no time or no finite value, counts that are no times', async () => {
    expect(await refusal(await at(`${TIME}, range AS levle, range AS flow`))).toMatch(
      /expected a column or signal "level".*perhaps "levle" is meant/,
    );
    const gap = 'CASE WHEN range = 3 THEN NULL ELSE to_timestamp(1704067200 + 60 * range) END AS time';
    expect(await refusal(await at(`${gap}, range AS level, range AS flow`))).toMatch(
      /\.parquet:4, column "time": expected a time in every row, got none/,
    );
    expect(await refusal(await at(`${TIME}, range AS level, 1e308 * 10 ^ range AS flow`))).toMatch(
      /\.parquet:2, column "flow": expected a number, or nothing where there is no reading, got Infinity/,
    );
    expect(await refusal(await at('range AS time, range AS level, range AS flow'))).toMatch(
      /:1, column "time": .*this looks like a row number/,
    );
    expect(await refusal(await at('1704067200000000 + range AS time, range AS level, range AS flow'))).toMatch(
      /perhaps micro- or nanoseconds/,
    );
    expect(await refusal(await at("'soon' AS time, range AS level, range AS flow"))).toMatch(
      /:1, column "time": expected a time in ISO 8601.*got "soon"/,
    );
    expect(await refusal(await at(`${TIME}, NULL::VARCHAR AS signal, range AS value`))).toMatch(
      /:1, column "signal": expected a name, got nothing/,
    );
    expect(await refusal(await at(`${TIME}, range AS level, range AS flow`, 0))).toMatch(
      /expected rows of readings, got a file without rows/,
    );
  });
  it('names a file that was cut off or damaged, whole and in one sentence', async () => {
    const path = await parquet(`SELECT ${TIME}, hash(range)::DOUBLE AS level, random() AS flow FROM range(50000)`);
    const bytes = readFileSync(path);
    const cut = folder.write('cut.parquet', bytes.subarray(0, bytes.length / 2));
    const bent = Buffer.from(bytes);
    bent.fill(7, bytes.length / 2, bytes.length / 2 + 100_000);
    const wrong = folder.write('bent.parquet', bent);
    for (const one of [cut, wrong])
      expect(await refusal(one)).toBe(
        `${one}: expected a whole Parquet file, got a damaged or cut-off one; copy or export it again`,
      );
  });
});

it('is told from its first bytes, whatever its name', async () => {
  const path = await parquet(
    'SELECT to_timestamp(1704067200 + 60 * range) AS time, range AS level, range AS flow FROM range(5)',
    undefined,
    'odd.csv',
  );
  expect((await load(path)).series.firstTick).toBe(START / 60_000);
});
