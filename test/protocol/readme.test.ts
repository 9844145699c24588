/** The tables of protocol/README.md against the schemas, the topics, the envelope and the limits they describe. */
import { readFileSync } from 'node:fs';
import { describe, expect, test } from 'vitest';
import type { z } from 'zod';
import { answerSchema } from '../../protocol/answer.ts';
import { bundleSchema } from '../../protocol/bundle-schema.ts';
import { HEADER_BYTES, MAX_SIGNATURES } from '../../protocol/envelope.ts';
import { forecastSchema } from '../../protocol/forecast.ts';
import { forecastsSchema } from '../../protocol/forecasts.ts';
import { healthSchema } from '../../protocol/health.ts';
import { KEY_ID_BYTES, SIGNATURE_BYTES } from '../../protocol/keys.ts';
import * as limits from '../../protocol/limits.ts';
import { planSchema } from '../../protocol/plan.ts';
import { questionSchema } from '../../protocol/question.ts';
import { receiptSchema } from '../../protocol/receipt.ts';
import { parseSite } from '../../protocol/site.ts';
import { PAYLOAD_KEYS } from '../../protocol/site-payload.ts';
import { siteFileSchema } from '../../protocol/site-schema.ts';
import { stateSchema } from '../../protocol/state.ts';
import { parseTopic, topicsOf } from '../../protocol/topics.ts';
import { warningSchema } from '../../protocol/warning.ts';
import { schemaFields } from '../support/schema-fields.ts';

const readme = readFileSync(new URL('../../protocol/README.md', import.meta.url), 'utf8');

/** Rows of a marked table: cells without the backticks around the first. */
const tableOf = (text: string, name: string): readonly (readonly string[])[] => {
  const after = text.split(`<!-- table: ${name} -->\n\n`)[1];
  if (after === undefined) throw new Error(`the page has no table marked ${name}`);
  const lines = after.split('\n\n')[0]!.trim().split('\n').slice(2);
  return lines.map((line) => {
    const cells = line
      .split('|')
      .slice(1, -1)
      .map((cell) => cell.trim());
    return [cells[0]!.replace(/^`|`$/g, ''), ...cells.slice(1)];
  });
};

/** What is wrong with a table of fields, by its schema; nothing if all is well. */
const disagreements = (rows: readonly (readonly string[])[], schema: z.ZodType): string[] => {
  const fields = schemaFields(schema);
  const told = rows.map(([path]) => path!);
  const wrong = [
    ...fields.filter(({ path }) => !told.includes(path)).map(({ path }) => `${path} is not in the table`),
    ...told.filter((path) => !fields.some((field) => field.path === path)).map((path) => `${path} is no field`),
    ...told.filter((path, i) => told.indexOf(path) !== i).map((path) => `${path} stands twice`),
  ];
  for (const [path, holds] of rows) {
    const field = fields.find((one) => one.path === path);
    if (field === undefined) continue;
    // Columns of channels hold null per cell, which the schema of the column itself does not show.
    const isLevel = path!.startsWith('channels.');
    if (field.isNullable !== /\bnull\b/.test(holds!) && !isLevel)
      wrong.push(`${path}: null in the schema, or in the table, but not in both`);
    if (field.isOptional !== /\babsent\b/.test(holds!))
      wrong.push(`${path}: absent in the schema, or in the table, but not in both`);
  }
  return wrong;
};

describe('the check itself', () => {
  const rows = tableOf(readme, 'receipt');
  test('sees a missing, an extra, a doubled and a mistaken row', () => {
    expect(disagreements(rows.slice(1), receiptSchema)).toEqual(['format is not in the table']);
    expect(disagreements([...rows, ['number', 'count', '']], receiptSchema)).toEqual(['number is no field']);
    expect(disagreements([...rows, rows[0]!], receiptSchema)).toEqual(['format stands twice']);
    const nulls = rows.map((row) => (row[0] === 'stream' ? ['stream', '8 bytes or null', ''] : row));
    expect(disagreements(nulls, receiptSchema)).toHaveLength(1);
  });
});

describe('tables of fields', () => {
  const head = tableOf(readme, 'head');
  test.each<[string, readonly (readonly string[])[], z.ZodType]>([
    ['bundle', tableOf(readme, 'bundle'), bundleSchema],
    ['state', [...head, ...tableOf(readme, 'state')], stateSchema],
    ['forecast', [...head, ...tableOf(readme, 'forecast')], forecastSchema],
    ['forecasts', tableOf(readme, 'forecasts'), forecastsSchema],
    ['health', [...head, ...tableOf(readme, 'health')], healthSchema],
    ['receipt', tableOf(readme, 'receipt'), receiptSchema],
    ['warning', [...head, ...tableOf(readme, 'warning')], warningSchema],
    ['plan', tableOf(readme, 'plan'), planSchema],
    ['question', tableOf(readme, 'question'), questionSchema],
    ['answer', [...head, ...tableOf(readme, 'answer')], answerSchema],
  ])('%s', (_, rows, schema) => expect(disagreements(rows, schema)).toEqual([]));

  test('limits of channels may be null, and the table says so', () => {
    const rows = tableOf(readme, 'bundle').filter(([path]) => /^channels\.(highHigh|high|low|lowLow)$/.test(path!));
    expect(rows.map(([, holds]) => holds)).toEqual(Array(4).fill('nc numbers or null'));
  });
});

describe('the site file', () => {
  const rows = tableOf(readme, 'site file');
  const fields = schemaFields(siteFileSchema);

  test('every field stands in the table, and nothing else', () => {
    const isOwn = (path: string): boolean => !path.startsWith('inputs[].') || path === 'inputs[].plan_topic';
    expect(rows.map(([path]) => path)).toEqual(fields.map(({ path }) => path).filter(isOwn));
  });

  test('an input has every field of a signal, and a plan', () => {
    const of = (list: string): string[] =>
      fields.filter(({ path }) => path.startsWith(`${list}[].`)).map(({ path }) => path.slice(list.length + 3));
    expect(of('inputs')).toEqual([...of('signals'), 'plan_topic']);
  });

  test('what is required is said to be', () => {
    const required = rows.filter(([, leftOut]) => leftOut === 'required').map(([path]) => path);
    expect(required).toEqual(
      fields.filter((field) => !field.isOptional && !field.path.startsWith('inputs[]')).map(({ path }) => path),
    );
  });

  test('keys of a payload map', () => {
    const payload = rows.find(([path]) => path === 'signals[].payload')!;
    for (const key of PAYLOAD_KEYS) expect(payload[2]).toContain(`\`${key}\``);
  });

  test('defaults are what the parser fills in', () => {
    const site = parseSite(
      'site: a\ntime_zone: UTC\ntick: 1min\nhorizon: 2\nsignals: [{name: t}]\ninputs: [{name: u}]\n',
    );
    const leftOut = (path: string): string => rows.find(([name]) => name === path)![1]!.replaceAll('`', '');
    expect(leftOut('class')).toBe(site.equipmentClass);
    expect(leftOut('root')).toBe(site.root);
    expect(leftOut('residual_budget')).toBe(String(site.residualBytesPerDay));
    expect(leftOut('signals[].unit')).toBe(site.signals[0]!.unit);
    expect(leftOut('signals[].aggregate')).toBe(
      `${site.signals[0]!.aggregate} for signals, ${site.inputs[0]!.aggregate} for inputs`,
    );
    expect(leftOut('calendar.time_of_day')).toBe(String(site.calendar.timeOfDay));
  });

  test('the example is a site file', () => {
    const example = /```yaml\n([\s\S]*?)```/.exec(readme)![1]!;
    expect(parseSite(example, 'README.md').signals[0]!.name).toBe('level');
  });
});

describe('envelope, topics, limits', () => {
  test('the envelope has no gap and ends where the code says', () => {
    const rows = tableOf(readme, 'envelope');
    let at = 0;
    for (const [offset, size] of rows.slice(0, -2)) {
      expect(Number(offset)).toBe(at);
      at += Number(size);
    }
    expect(at).toBe(HEADER_BYTES);
    expect(rows.at(-2)!.slice(0, 2)).toEqual([String(HEADER_BYTES), `${KEY_ID_BYTES + SIGNATURE_BYTES} each`]);
    expect(rows[2]![2]).toContain(`1 to ${MAX_SIGNATURES}`);
  });

  test('every topic stands in the table, and each is one of ours', () => {
    const told = tableOf(readme, 'topics').map(([topic]) => topic);
    const { forecast, warning, answers, ...fixed } = topicsOf('{root}', '{site}');
    const named = [forecast('{signal}'), warning('{signal}'), answers('{asker}')];
    expect([...told].sort()).toEqual([...Object.values(fixed), ...named].sort());
    for (const topic of told) expect(parseTopic('{root}', topic!)).not.toBeNull();
  });

  test('every limit stands in the table with its value', () => {
    const told = tableOf(readme, 'limits').map(([name, value]) => [name, Number(value)]);
    expect(Object.fromEntries(told)).toEqual({ ...limits });
  });
});
