/**
 * Histories that are no good, through the commands: refused with one line, or taken and told what was odd. A few of each
 * kind, since every run is a process; trainer/history/bad-input.test.ts has the others.
 */
import { afterAll, describe, expect, it } from 'vitest';
import { csv, Folders, HEADER, PICTURE, ROWS, SITE_FILE, withColumn } from '../support/bad-input.ts';
import { type Case, contentsOf } from '../support/cli.ts';
import { documentOf, SITE_TEXT } from '../support/running-site.ts';

const folders = new Folders();
afterAll(() => folders.remove());

const GOOD = csv(ROWS);
const survey = 'stillwell survey --site site.yaml --history x.csv --out survey.json';
const fit = 'stillwell fit --site site.yaml --history x.csv --out out';
const draft = 'stillwell site --history x.csv --out draft.yaml';

const cases: Record<string, Case> = {
  'a missing file': { line: fit, says: [/: x\.csv: expected a history file/, /no such file; check the path/] },
  'an empty file': { line: draft, files: { 'x.csv': '' }, says: [/x\.csv: expected a header/, /export it again/] },
  'a picture': { line: fit, files: { 'x.csv': PICTURE }, says: [/x\.csv:1: expected UTF-8 text/, /convert|export/] },
  'blanks for separators': {
    line: survey,
    files: { 'x.csv': GOOD.replaceAll(',', ' ') },
    says: [/x\.csv:1: expected a header .* separated by comma/, /check the separator/],
  },
  'decimal commas': {
    line: fit,
    files: { 'x.csv': GOOD.replaceAll(',', ';').replaceAll('.', ',') },
    says: [/x\.csv:2, column "level": expected a number, got "\d+,\d+"/, /export with decimal points/],
  },
  'a column twice': {
    line: draft,
    files: { 'x.csv': csv(ROWS, 'time,level,level,temp') },
    says: [/x\.csv:1, column "level": .*columns 2 and 3; rename or take out/],
  },
  'an unknown column': {
    line: fit,
    files: { 'x.csv': csv(ROWS, 'time,levle,flow,temp') },
    says: [/x\.csv: expected a column or signal "level"/, /perhaps "levle" is meant/],
  },
  'text in a column of numbers': {
    line: survey,
    files: { 'x.csv': csv(withColumn(1, (text, n) => (n === 50 ? 'high' : text))) },
    says: [/x\.csv:52, column "level": expected a number/, /got "high"; mend the field/],
  },
  'times without a zone, and none given': {
    line: draft,
    files: { 'x.csv': GOOD.replaceAll('Z,', ',') },
    says: [/x\.csv:2, column "time": expected a time with a zone/, /--time-zone Europe\/London/],
  },
  'one time alone': {
    line: draft,
    files: { 'x.csv': csv(ROWS.slice(0, 1)) },
    says: [/x\.csv: expected readings at two times at least/, /give a longer history/],
  },
  'a horizon longer than the history': {
    line: fit,
    files: { 'x.csv': csv(ROWS.slice(0, 2)) },
    says: [/horizon of 24 ticks is longer than the history of 2 ticks/, /[Ss]horten the horizon/],
  },
  'a history shorter than the longest window': {
    line: fit,
    files: { 'x.csv': csv(ROWS.slice(0, 100)) },
    says: [/history holds 100 ticks.*expected at least \d+/, /[Gg]ive a longer history/],
  },
  'two years of one constant': {
    line: fit,
    files: {
      'x.csv': csv(
        Array.from({ length: 17_520 }, (_, n) => `${new Date(Date.UTC(2023, 0, 1) + n * 3.6e6).toISOString()},3,20,12`),
      ),
    },
    says: [/level, flow, temp.*keeps one value/, /[Cc]heck the columns/],
  },
  'no readings at all': {
    line: fit,
    files: { 'x.csv': csv(ROWS.map((row) => `${row.split(',')[0]},,,`)) },
    says: [/[Ss]ignal level: expected at least \d+ readings.*got 0/, /[Cc]heck its column/],
  },
};

describe('refused in one line, exit code 2, nothing written', () => {
  it.each(Object.entries(cases))('%s', (_, one) => folders.refuse(one, { 'site.yaml': SITE_FILE }), 120_000);

  it('nothing to judge a bundle by', async () => {
    const rows = ROWS.map((row) => `${row.split(',')[0]},,,`);
    await folders.refuse({
      line: 'stillwell hindcast --bundle x.swc --site site.yaml --history x.csv --from 2024-01-10',
      files: { 'site.yaml': SITE_TEXT, 'x.swc': documentOf(), 'x.csv': csv(rows, 'time,level,flow,pump') },
      says: [/x\.csv: expected readings of at least one signal from 2024-01-10/, /check the columns/],
    });
  }, 120_000);
});

const odd: Record<string, readonly [content: string, finding: RegExp]> = {
  'out of order': [csv(ROWS.toSorted((a, b) => (a.slice(-3) < b.slice(-3) ? -1 : 1))), /goes back in time \d+ times/],
  'around a clock change': [
    csv(ROWS.map((row, n) => new Date(Date.UTC(2024, 9, 10) + n * 3.6e6).toISOString().slice(0, 16) + row.slice(24))),
    /Clocks in Europe\/London went through the same 1 h twice around 2024-10-27T01:00:00Z/,
  ],
  'one signal constant': [csv(withColumn(1, () => '3.00')), /!! level is 3 in all 960 readings/],
  'one signal a copy of another': [csv(withColumn(2, (_, n) => ROWS[n]!.split(',')[1]!)), /flow .*level|level .*flow/],
  'one reading of 1e12': [
    csv(withColumn(1, (text, n) => (n === 500 ? '1e12' : text))),
    /level.* 1 reading.*1000000000000/,
  ],
};

describe('taken, and told', () => {
  it.each(Object.entries(odd))(
    '%s',
    async (_, [content, finding]) => {
      const folder = folders.make({ 'site.yaml': SITE_FILE, 'x.csv': content });
      const { code, out, err } = await folders.run('stillwell survey --site site.yaml --history x.csv', folder);
      expect({ code, err }).toEqual({ code: 0, err: '' });
      expect(out.replace(/\s+/g, ' ')).toMatch(finding);
    },
    120_000,
  );

  it('a good history: no finding, a draft that reads back, a candidate', async () => {
    const folder = folders.make({ 'site.yaml': SITE_FILE, 'x.csv': csv(ROWS, HEADER) });
    const found = await folders.run('stillwell survey --site site.yaml --history x.csv', folder);
    expect(found.out).not.toMatch(/!/);
    expect(await folders.run('stillwell site --history x.csv --out draft.yaml', folder)).toMatchObject({
      code: 0,
      err: '',
    });
    expect(await folders.run('stillwell survey --site draft.yaml --history x.csv', folder)).toMatchObject({
      code: 0,
      err: '',
    });
    expect(await folders.run('stillwell fit --site site.yaml --history x.csv --out out', folder)).toMatchObject({
      code: 0,
      err: '',
    });
    expect(Object.keys(contentsOf(folder)).some((path) => path.endsWith('candidate.swc'))).toBe(true);
  }, 120_000);
});
