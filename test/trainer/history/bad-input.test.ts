/** Every refusal of a history file: one line that says where, expected, got, what to do. */

import { mkdirSync } from 'node:fs';
import { join } from 'node:path';
import { gzipSync } from 'node:zlib';
import { afterAll, describe, expect, it } from 'vitest';
import { TrainError } from '../../../trainer/errors.ts';
import { loadHistory } from '../../../trainer/history/load.ts';
import { Folder, signal, site } from './support.ts';

const folder = new Folder();
afterAll(() => folder.remove());

const PLAIN = site(['level', 'flow']);

async function refusalOf(
  paths: string | readonly string[],
  asked = PLAIN,
  zone: string | null = null,
): Promise<string> {
  const files = typeof paths === 'string' ? [paths] : paths;
  const error = await loadHistory(files, asked, { zone, requireZone: true }).then(
    () => null,
    (cause: unknown) => cause,
  );
  expect(error).toBeInstanceOf(TrainError);
  const { message } = error as TrainError;
  expect(message).not.toContain('\n');
  expect(message).toContain(files[0]!);
  return message;
}

let number = 0;
const file = (content: string | Uint8Array): string => folder.write(`h${number++}.csv`, content);
const H = 'time,level,flow\n';
const ROW = '2024-01-01T00:00:00Z,1.5,2\n2024-01-01T00:01:00Z,1.6,2\n';

describe('what is no history file at all', () => {
  it('names a missing file, a folder without files, an empty file, blank lines', async () => {
    expect(await refusalOf(join(folder.path, 'none.csv'))).toMatch(/there is no such file; check the path/);
    const empty = join(folder.path, 'empty');
    mkdirSync(empty);
    expect(await refusalOf(empty)).toMatch(/expected history files in this folder \(\.csv.*, got none; check the path/);
    expect(await refusalOf(join(empty, '*.csv'))).toMatch(/expected history files that match this pattern, got none/);
    expect(await refusalOf(file(''))).toMatch(/got an empty file/);
    expect(await refusalOf(file('\n\n'))).toMatch(/blank lines alone/);
  });
  it('names a header alone, and readings without one', async () => {
    expect(await refusalOf(file(H))).toMatch(/got the header alone/);
    expect(await refusalOf(file(ROW))).toMatch(/:1: expected a header line with the names of the columns/);
  });
  it('names bytes that are no text, with their line', async () => {
    expect(await refusalOf(file(Buffer.concat([Buffer.from(H + ROW), Buffer.from([0, 1, 2, 10])])))).toMatch(
      /:4: expected text, got a NUL byte/,
    );
    expect(await refusalOf(file(Buffer.from(`time,level,fl\xfcss\n${ROW}`, 'latin1')))).toMatch(
      /:1: expected UTF-8 text.*convert the file/,
    );
    expect(await refusalOf(file(Buffer.from(`\ufeff${H}${ROW}`, 'utf16le')))).toMatch(
      /got UTF-16 text; save or convert the file as UTF-8/,
    );
    expect(await refusalOf(file(Buffer.alloc(3_000_000, 0x61)))).toMatch(
      /:1: expected lines of text, got a line of more than 1048576 bytes/,
    );
    expect(await refusalOf(file(gzipSync(H + ROW.repeat(50)).subarray(0, 60)))).toMatch(
      /expected a whole gzip file, got a damaged one/,
    );
  });
});

describe('a header that is not right', () => {
  it('names a separator it cannot find, and a column named twice or not at all', async () => {
    expect(await refusalOf(file('time level flow\n1 2 3\n'))).toMatch(
      /:1: expected a header with a time column.*separated by comma, semicolon, tab or \|, got "time level flow"/,
    );
    expect(await refusalOf(file(`time,level,level\n${ROW}`))).toMatch(
      /:1, column "level": expected each column name once, got it in columns 2 and 3/,
    );
    expect(await refusalOf(file(`time,level,,flow\n${ROW}`))).toMatch(
      /:1: expected a name for every column, got none for column 3/,
    );
  });
  it('names a column of the site file that is not there, and the likeliest one meant', async () => {
    expect(await refusalOf(file(`time,levle,flow\n${ROW}`))).toMatch(
      /expected a column or signal "level".*perhaps "levle" is meant: set "column" of "level" to it/,
    );
    expect(await refusalOf(file('time,signal,value\n2024-01-01T00:00:00Z,flow,2\n'))).toMatch(
      /expected a column or signal "level"/,
    );
  });
});

describe('a row that is not right', () => {
  it('names text in a column of numbers by line and column', async () => {
    expect(await refusalOf(file(`${H}${ROW}2024-01-01T00:02:00Z,bad,3\n`))).toMatch(
      /:4, column "level": expected a number, or an empty field.*got "bad"/,
    );
    expect(await refusalOf(file(`${H}"2024-01-01T00:00:00Z",1,"a\nb"\n`))).toMatch(/:2, column "flow": .*got "a\?b"/);
    expect(await refusalOf(file(`${H}${ROW}2024-01-01T00:02:00Z,1e999,3\n`))).toMatch(/got "1e999"/);
  });
  it('counts line breaks inside quotes, so that the line is the one an editor shows', async () => {
    expect(
      await refusalOf(
        file(`time,"level","flow","note\nof two lines"\n${ROW.replaceAll('\n', ',x\n')}2024-01-01T00:02:00Z,bad,3,y\n`),
      ),
    ).toMatch(/:5, column "level"/);
  });
  it('refuses decimal commas in so many words', async () => {
    expect(await refusalOf(file('time;level;flow\n2024-01-01T00:00:00Z;1,5;2,0\n'))).toMatch(
      /:2, column "level": expected a number, got "1,5" with a decimal comma; export with decimal points/,
    );
    expect(await refusalOf(file('time,level,flow\n2024-01-01T00:00:00Z,1,5,2,0\n'))).toMatch(
      /:2: expected 3 fields as in the header, got 5 \(numbers with a decimal comma/,
    );
  });
  it('names ragged rows and open quotes', async () => {
    expect(await refusalOf(file(`${H}${ROW}2024-01-01T00:02:00Z,1\n`))).toMatch(
      /:4: expected 3 fields as in the header, got 2; mend or drop this line/,
    );
    expect(await refusalOf(file(`${H}${ROW}2024-01-01T00:02:00Z,"1,2\n`))).toMatch(/:4: expected a closing quote/);
    expect(await refusalOf(file(`${H}2024-01-01T00:02:00Z,"1"2,3\n`))).toMatch(
      /:2: expected a separator after the closing quote, got "2"/,
    );
  });
});

describe('a time that is not right', () => {
  const at = (time: string): string => file(`${H}${time},1,2\n`);
  it('says how to declare a zone where there is none', async () => {
    expect(await refusalOf(at('2024-01-01 00:00:00'))).toMatch(
      /:2, column "time": expected a time with a zone.*--time-zone Europe\/London/,
    );
  });
  it('refuses orders of day and month that cannot be told, row numbers, counts too fine, dates that are none', async () => {
    expect(await refusalOf(at('03/04/2024 00:00'))).toMatch(
      /year first, got "03\/04\/2024 00:00"; the order of day and month cannot be told/,
    );
    expect(await refusalOf(at('17'))).toMatch(/got "17"; this looks like a row number/);
    expect(await refusalOf(at('1704067200000000'))).toMatch(/perhaps micro- or nanoseconds/);
    for (const none of [
      '2024-02-30T00:00:00Z',
      '2023-02-29T00:00:00Z',
      '2024-13-01T00:00:00Z',
      '2024-01-01T25:00:00Z',
      '2024-01-01T00:60:00Z',
      '2024-01-01T00:00:00+2',
      '',
      'soon',
    ])
      expect(await refusalOf(at(none))).toMatch(/column "time": expected a time in ISO 8601/);
  });
  it('refuses a file that changes its kind of time, and a zone that does not exist', async () => {
    expect(await refusalOf(file(`${H}1704067200,1,2\n1704067260000,1,2\n`))).toMatch(
      /:3, column "time": expected epoch seconds as in the rows before, got "1704067260000"/,
    );
    const error = await loadHistory([file(`${H}2024-01-01 00:00,1,2\n`)], PLAIN, { zone: 'Europe/Lundon' }).catch(
      (cause: unknown) => cause,
    );
    expect((error as TrainError).message).toMatch(/expected an IANA name.*got "Europe\/Lundon"/);
  });
});

describe('lines of JSON that are not right', () => {
  it('names line and member', async () => {
    expect(await refusalOf(file('{"time":"2024-01-01T00:00:00Z","signal":"level","value":1}\n{"time":\n'))).toMatch(
      /:2: expected one JSON object a line/,
    );
    expect(await refusalOf(file('{"time":"2024-01-01T00:00:00Z","value":1}\n'))).toMatch(
      /:1, column "signal": expected the name of a signal, got nothing/,
    );
    expect(await refusalOf(file('{"time":"2024-01-01T00:00:00Z","signal":"level","value":{"a":1}}\n'))).toMatch(
      /:1, column "value": expected a number/,
    );
    expect(await refusalOf(file('{"signal":"level","value":1}\n'))).toMatch(
      /:1, column "time": expected a time in ISO 8601, got nothing/,
    );
    expect(await refusalOf(file('[{"time":1}]\n'))).toMatch(/got a JSON list; write each object/);
    expect(
      await refusalOf(
        file('{"time":"2024-01-01T00:00:00Z","topic":"plant/test/level","payload":"##","encoding":"base64"}\n'),
      ),
    ).toMatch(/column "payload": expected base64/);
  });
});

describe('a history that is too little', () => {
  it('refuses fewer than two ticks, and a stray time that stretches it', async () => {
    expect(await refusalOf(file(`${H}2024-01-01T00:00:00Z,1,2\n2024-01-01T00:00:30Z,1,2\n`))).toMatch(
      /expected readings over at least two ticks of 60 s, got one tick/,
    );
    expect(await refusalOf(file(`${H}1975-01-01T00:00:00Z,1,2\n${ROW}`))).toMatch(/a stray time stretches the history/);
  });
});

it('needs no range to be right: the refusals above are about the file, a signal with a range reads the same file', async () => {
  const loaded = await loadHistory([file(H + ROW)], site([signal('level', { range: [0, 5] }), 'flow']), { zone: null });
  expect(loaded.series.ticks).toBe(2);
});
