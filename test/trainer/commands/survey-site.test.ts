/** `stillwell site` and `stillwell survey` as a user runs them, in this process. */
import { existsSync, readFileSync } from 'node:fs';
import { join } from 'node:path';
import { afterAll, afterEach, beforeEach, describe, expect, it, vi } from 'vitest';
import { parseSite } from '../../../protocol/index.ts';
import { siteCommand } from '../../../trainer/commands/site.ts';
import { surveyCommand } from '../../../trainer/commands/survey.ts';
import { progressLine } from '../../../trainer/progress.ts';
import { Folder } from '../history/support.ts';

const folder = new Folder();
afterAll(() => folder.remove());
let printed = '';
beforeEach(() => {
  printed = '';
  vi.spyOn(process.stdout, 'write').mockImplementation((text) => {
    printed += text;
    return true;
  });
});
afterEach(() => vi.restoreAllMocks());
const site = (...words: string[]): Promise<unknown> => siteCommand().exitOverride().parseAsync(words, { from: 'user' });
const survey = (...words: string[]): Promise<unknown> =>
  surveyCommand().exitOverride().parseAsync(words, { from: 'user' });

const rows = Array.from({ length: 500 }, (_, n) => {
  const time = new Date(Date.UTC(2024, 5, 1) + n * 600_000).toISOString().slice(0, 19).replace('T', ' ');
  return `${time};${(12 + (n % 37) / 2).toFixed(1)};${n % 2};ok`;
});
const log = folder.write('log.csv', `when;Supply temp [°C];pump 1;note\n${rows.join('\n')}\n`);

describe('site', () => {
  it('drafts a file that reads back, and will not write over it unless told to', async () => {
    const out = join(folder.path, 'site.yaml');
    await site(
      '--history',
      log,
      '--name',
      'mill-lane',
      '--class',
      'substation',
      '--time-zone',
      'Europe/London',
      '--out',
      out,
    );
    const text = readFileSync(out, 'utf8');
    const drafted = parseSite(text, out);
    expect(drafted).toMatchObject({
      site: 'mill-lane',
      equipmentClass: 'substation',
      timeZone: 'Europe/London',
      tickMs: 600_000,
      horizon: 144,
    });
    expect(
      drafted.signals.map(({ name, column, unit, topic, resolution, aggregate }) => ({
        name,
        column,
        unit,
        topic,
        resolution,
        aggregate,
      })),
    ).toEqual([
      {
        name: 'Supply_temp',
        column: 'Supply temp [°C]',
        unit: 'Cel',
        topic: 'plant/mill-lane/Supply_temp',
        resolution: 0.5,
        aggregate: 'mean',
      },
      {
        name: 'pump_1',
        column: 'pump 1',
        unit: '1',
        topic: 'plant/mill-lane/pump_1',
        resolution: 1,
        aggregate: 'last',
      },
    ]);
    expect(drafted.signals[0]!.range).toEqual([-10, 50]);
    expect(text).toMatch(/# A first site file/);
    expect(printed).toContain('2 signals, tick 600 s, horizon 144 ticks');
    await expect(site('--history', log, '--name', 'other', '--time-zone', 'UTC', '--out', out)).rejects.toThrow(
      /is there already; add --force/,
    );
    expect(readFileSync(out, 'utf8')).toBe(text);
    await site('--history', log, '--name', 'other', '--time-zone', '+01:00', '--out', out, '--force');
    expect(parseSite(readFileSync(out, 'utf8'), out)).toMatchObject({ site: 'other', timeZone: 'Etc/GMT-1' });
  });
  it('drafts from captured messages: topics, payload pointers, names', async () => {
    const lines = Array.from({ length: 50 }, (_, n) => [
      {
        time: 1717200000 + n * 10,
        topic: 'works/a/t1',
        payload: JSON.stringify({ value: n / 10, ts: 1717200000000 + n * 10_000 }),
      },
      { time: 1717200000 + n * 10, topic: 'works/a/p', payload: String(n % 9) },
    ]).flat();
    const capture = folder.write('c.ndjson', lines.map((line) => JSON.stringify(line)).join('\n'));
    await site('--history', capture, '--name', 'works');
    expect(parseSite(printed, 'printed')).toMatchObject({
      tickMs: 10_000,
      signals: [
        { name: 't1', topic: 'works/a/t1', payload: { kind: 'json', value: '/value', time: '/ts' } },
        { name: 'p', topic: 'works/a/p', payload: { kind: 'number' } },
      ],
    });
  });
  it('writes nothing where the history or the name is refused', async () => {
    const out = join(folder.path, 'none.yaml');
    await expect(site('--history', log, '--out', out)).rejects.toThrow(/--time-zone Europe\/London/);
    await expect(site('--history', log, '--name', 'a/b', '--out', out)).rejects.toThrow(/--name: expected a name/);
    await expect(
      site('--history', folder.write('t.csv', 'time,a\n2024-01-01T00:00:00Z,x\n'), '--out', out),
    ).rejects.toThrow(/at least one column of numbers/);
    expect(existsSync(out)).toBe(false);
  });
});

describe('survey', () => {
  it('works without a site file, as text and as JSON, and saves the same survey', async () => {
    const out = join(folder.path, 'survey.json');
    await survey('--history', log, '--time-zone', 'Europe/London', '--out', out);
    expect(printed).toMatch(/Survey of history: one file \(wide CSV, ISO without zone\), 500 rows/);
    printed = '';
    await survey('--history', log, '--time-zone', 'Europe/London', '--json');
    expect(printed).toBe(readFileSync(out, 'utf8'));
    expect(JSON.parse(printed)).toMatchObject({ format: 1, ticks: 500, tickS: 600, zone: 'Europe/London' });
  });
  it('shows an example in its help', () => {
    for (const command of [siteCommand(), surveyCommand()]) {
      let help = '';
      command.configureOutput({ writeOut: (text) => (help += text) }).outputHelp();
      expect(help).toMatch(/Examples?:\n {2}stillwell s/);
    }
  });
});

it('progress tells pace, share and time left where they are known', () => {
  expect(progressLine('reading', 'rows', 250_000, 1_000_000, 2000)).toBe('reading: 25 %, 125 k rows/s, 6 s left');
  expect(progressLine('reading', 'rows', 500, null, 500)).toBe('reading: 500 rows, 1000 rows/s');
});
