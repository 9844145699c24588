/** A reading that is interrupted at any moment goes on from there and comes to the same bits; what has changed starts anew. */

import { existsSync, readFileSync, utimesSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { gzipSync } from 'node:zlib';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { INTERRUPTED_CODE, type Interrupt, Interrupted } from '../../../trainer/history/interrupt.ts';
import { loadLong } from '../../../trainer/history/long.ts';
import {
  columns,
  copy,
  KeepingSink,
  LIMITS,
  ndjson,
  type Row,
  rows,
  type Streamed,
  stream,
  wideCsv,
} from './long-support.ts';
import { Folder, signal, site } from './support.ts';

const folder = new Folder();
afterAll(() => folder.remove());
const PLACE = join(folder.path, 'place');
const SITE = site([signal('level', { aggregate: 'mean' }), signal('flow', { aggregate: 'increment' })]);
const ALL = rows(700).map((r, n) => ({ ...r, flow: n * 2 }));
const MIXED = ALL.map((_, n) => ALL[n % 7 === 0 ? Math.min(n + 1, 699) : n % 7 === 1 ? n - 1 : n] as Row);

/** Asks to stop at the n-th look. */
class AskAt implements Interrupt {
  looks = 0;
  readonly #at: number;
  constructor(at: number) {
    this.#at = at;
  }
  get isAsked(): boolean {
    return ++this.looks >= this.#at;
  }
}

/** All that may differ between two readings. */
function factsOf({ loaded, sink, values }: Streamed): unknown {
  const { series, survey, older, history } = loaded;
  return JSON.parse(
    JSON.stringify(
      [values, sink.chunks, [...series.digest], survey, older, history.files, history.clockChanges],
      (_, v) => (Number.isNaN(v) ? 'NaN' : v),
    ),
  );
}

let paths: Record<string, string[]>;
beforeAll(async () => {
  const connection = await columns();
  const csv = folder.write('all.csv', wideCsv(ALL));
  const types = "types = {'time': 'TIMESTAMPTZ', 'level': 'DOUBLE', 'flow': 'DOUBLE'}";
  const question = `SELECT * FROM read_csv('${csv}', ${types})`;
  const many = `SELECT time + to_microseconds(range * 4000000) AS time, level, flow + range / 15.0 AS flow FROM (${question}), range(15) ORDER BY 1`;
  const parquet = (text: string, name: string): Promise<string> => copy(connection, text, join(folder.path, name));
  paths = {
    'wide CSV, rows out of order': [folder.write('mixed.csv', wideCsv(MIXED))],
    'packed CSV': [folder.write('all.csv.gz', gzipSync(wideCsv(ALL)))],
    'CSV with quoted line breaks': [
      folder.write('quoted.csv', wideCsv(ALL).replaceAll('\n', ',"a\nb"\n').replace('"a\nb"', 'note').slice(0, -6)),
    ],
    NDJSON: [folder.write('all.ndjson', ndjson(ALL))],
    'two files, side by side': [
      folder.write('b.csv', wideCsv(ALL.slice(250))),
      folder.write('a.ndjson', ndjson(ALL.slice(0, 300))),
    ],
    'Parquet, 10,500 rows': [await parquet(many, 'many.parquet')],
    'Parquet to be sorted': [await parquet(`SELECT * FROM (${many}) ORDER BY hash(time)`, 'hash.parquet')],
  };
  connection.closeSync();
});

describe('interrupted and gone on with', () => {
  it.each([
    'wide CSV, rows out of order',
    'packed CSV',
    'CSV with quoted line breaks',
    'NDJSON',
    'two files, side by side',
    'Parquet, 10,500 rows',
    'Parquet to be sorted',
  ])('%s: the same bits wherever it was', async (way) => {
    const files = paths[way] as string[];
    const look = new AskAt(Number.POSITIVE_INFINITY);
    const options = { resumeFile: PLACE, saveEveryMs: Number.POSITIVE_INFINITY };
    const expected = factsOf(await stream(files, SITE, { ...options, interrupt: look }));
    expect(look.looks).toBeGreaterThan(1);
    expect(existsSync(PLACE)).toBe(false);
    const every = Math.ceil(look.looks / 5);
    const stops = Array.from({ length: look.looks }, (_, k) => k + 1).filter((at) => at % every === 1 % every);
    // The last look is after the last reading.
    for (const at of new Set([...stops, look.looks])) {
      const stopped = stream(files, SITE, { ...options, interrupt: new AskAt(at) });
      await expect(stopped).rejects.toThrow(Interrupted);
      const said: string[] = [];
      const after = await stream(files, SITE, { ...options, say: (text) => said.push(text) });
      expect(factsOf(after)).toEqual(expected);
      expect(said).toEqual([expect.stringMatching(/^Going on from where reading was interrupted, after \d+ rows\.$/)]);
      after.loaded.done();
      expect(existsSync(PLACE)).toBe(false);
    }
  });
  it('interrupted again and again, at every block', async () => {
    const files = paths['two files, side by side'] as string[];
    const limits = { ...LIMITS, blockBytes: 2048 };
    const options = { resumeFile: PLACE, limits };
    const expected = factsOf(await stream(files, SITE, { limits }));
    let stops = 0;
    for (;;) {
      const once = await stream(files, SITE, { ...options, interrupt: new AskAt(1) }).catch((cause: unknown) => cause);
      if (!(once instanceof Interrupted)) {
        expect(factsOf(once as Streamed)).toEqual(expected);
        (once as Streamed).loaded.done();
        break;
      }
      stops++;
    }
    expect(stops).toBeGreaterThan(10);
  });
  it('saves now and then without being asked, so that a killed run goes on too', async () => {
    const files = paths.NDJSON as string[];
    const limits = { ...LIMITS, blockBytes: 8192 };
    const expected = factsOf(await stream(files, SITE, { limits }));
    const read = await stream(files, SITE, { resumeFile: PLACE, saveEveryMs: 0, limits });
    expect(factsOf(read)).toEqual(expected);
    // What took long to read stays until the result is written.
    expect(existsSync(PLACE)).toBe(true);
    const again = await stream(files, SITE, { resumeFile: PLACE, limits });
    expect(factsOf(again)).toEqual(expected);
    again.loaded.done();
    expect(existsSync(PLACE)).toBe(false);
  });
});

describe('a place that is of no use', () => {
  const files = (): string[] => [folder.write('own.csv', wideCsv(ALL))];
  const stop = async (own: string[]): Promise<void> => {
    const options = { resumeFile: PLACE, interrupt: new AskAt(3) };
    await expect(stream(own, SITE, options)).rejects.toThrow('Interrupted; the same command goes on from here.');
  };
  const goOn = async (own: string[], more = {}, asked = SITE): Promise<string> => {
    const said: string[] = [];
    const { loaded } = await stream(own, asked, { resumeFile: PLACE, say: (text) => said.push(text), ...more });
    loaded.done();
    expect(said).toHaveLength(1);
    return said[0] as string;
  };
  it('says what has changed, and starts anew', async () => {
    const own = files();
    await stop(own);
    writeFileSync(own[0]!, wideCsv(ALL).replace(/[0-9]\n$/, '7\n'));
    expect(await goOn(own)).toMatch(
      /place: .*own\.csv has changed since the interrupted run, so reading starts anew\.$/,
    );
    await stop(own);
    utimesSync(own[0]!, 1e9, 1e9);
    expect(await goOn(own)).toMatch(/own\.csv has changed since/);
    await stop(own);
    expect(await goOn(own, { untilMs: ALL[650]!.time })).toMatch(/the site file or the options have changed/);
    await stop(own);
    expect(await goOn(own, {}, { ...SITE, horizon: 12 })).toMatch(/the site file or the options have changed/);
    await stop(own);
    expect(await goOn([folder.write('other.csv', wideCsv(ALL))])).toMatch(
      /other files are given than to the interrupted run/,
    );
    await stop(own);
    const bytes = readFileSync(PLACE);
    bytes[bytes.length >> 1]! ^= 1;
    writeFileSync(PLACE, bytes);
    expect(await goOn(own)).toMatch(/is damaged or of another version/);
    writeFileSync(PLACE, 'something else');
    expect(await goOn(own)).toMatch(/is damaged or of another version/);
  });
  it('starts anew where its parts can no longer be put together', async () => {
    const own = files();
    await stop(own);
    const said: string[] = [];
    const broken = (): KeepingSink => {
      const sink = new KeepingSink();
      sink.restore = () => {
        throw new Error('another version');
      };
      return sink;
    };
    const options = { zone: null, limits: LIMITS, resumeFile: PLACE, say: (text: string) => said.push(text) };
    const { older, done } = await loadLong(own, SITE, options, broken);
    done();
    expect(said).toEqual([
      expect.stringMatching(/cannot be gone on from \(another version\), so reading starts anew\.$/),
    ]);
    expect(older?.digest).toEqual((await stream(own, SITE)).loaded.older?.digest);
  });
  it('says in one sentence where it cannot be saved', async () => {
    const resumeFile = join(files()[0]!, 'place');
    await expect(stream(files(), SITE, { resumeFile, interrupt: new AskAt(1) })).rejects.toThrow(
      /^cannot write .*: a file stands where a folder is wanted; give another place, or clear this one$/,
    );
  });
});

it('ends with the exit code that shells give an interrupt', () => {
  expect(INTERRUPTED_CODE).toBe(128 + 2);
  expect(LIMITS.blockBytes).toBeLessThan(1000);
});
