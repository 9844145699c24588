/** Each finding of the survey, on a history made to hold just that fault; and none on a clean one. */
import { afterAll, describe, expect, it } from 'vitest';
import type { Site } from '../../../protocol/index.ts';
import type { Finding, FindingKind } from '../../../trainer/history/finding.ts';
import { loadHistory } from '../../../trainer/history/load.ts';
import type { Survey } from '../../../trainer/history/survey.ts';
import { surveyText } from '../../../trainer/history/survey-text.ts';
import { Folder, signal, site } from './support.ts';

const folder = new Folder();
afterAll(() => folder.remove());
const START = Date.UTC(2024, 0, 1);
const LENGTH = 1200;

interface Row {
  time: string;
  level: string;
  flow: string;
}
/** A clean history: minutes, two signals that move on tenths. */
function clean(): Row[] {
  return Array.from({ length: LENGTH }, (_, n) => ({
    time: new Date(START + n * 60_000).toISOString(),
    level: (20 + ((n * 7919) % 101) / 10).toFixed(1),
    flow: (5 + ((n * 104729) % 67) / 10).toFixed(1),
  }));
}
let number = 0;
const write = (rows: readonly Row[]): string =>
  folder.write(
    `s${number++}.csv`,
    `time,level,flow\n${rows.map((r) => `${r.time},${r.level},${r.flow}`).join('\n')}\n`,
  );
async function surveyOf(
  rows: readonly Row[],
  asked: Site = site(['level', 'flow']),
  zone: string | null = null,
): Promise<Survey> {
  return (await loadHistory([write(rows)], asked, { zone })).survey;
}
function only(survey: Survey, kind: FindingKind): Finding {
  const found = survey.findings.filter((finding) => finding.kind === kind);
  expect(found.map(({ sentence }) => sentence)).toHaveLength(1);
  return found[0]!;
}
const changed = (change: (row: Row, n: number) => Partial<Row>): Row[] =>
  clean().map((row, n) => ({ ...row, ...change(row, n) }));

it('finds nothing in a clean history, and says the same every time', async () => {
  const survey = await surveyOf(clean());
  expect(survey.findings).toEqual([]);
  expect(survey).toMatchObject({
    ticks: LENGTH,
    tickS: 60,
    suggestedTickS: 60,
    from: '2024-01-01T00:00:00Z',
    zone: null,
  });
  expect(survey.signals[0]).toMatchObject({
    name: 'level',
    readings: LENGTH,
    missingShare: 0,
    intervalS: 60,
    jitterS: 0,
    lattice: { step: 0.1 },
    isStill: false,
  });
  expect(Object.isFrozen(survey.signals[0]!.lattice)).toBe(true);
  const { files: _, ...again } = await surveyOf(clean());
  const { files: __, ...first } = survey;
  expect(again).toEqual(first);
  expect(surveyText(survey)).toMatch(/level +1 +1200 +0\.0 % +1 min +0\.1 +20 +25 +30 +█{48}\n/);
});

describe('one fault, one finding', () => {
  it('gaps of all, and of one signal', async () => {
    const survey = await surveyOf(
      changed((_, n) => (n >= 900 && n < 950 ? { level: '', flow: '' } : n === 5 ? { flow: 'NA' } : {})),
    );
    expect(only(survey, 'gaps')).toMatchObject({
      signal: null,
      count: 1,
      from: '2024-01-01T15:00:00Z',
      to: '2024-01-01T15:50:00Z',
    });
    expect(only(survey, 'missing')).toMatchObject({ signal: 'flow', count: 1 });
    expect(only(survey, 'missing-marks').sentence).toBe(
      '101 fields said that there was no reading: empty 100 times, "NA" 1 times.',
    );
    expect(surveyText(survey)).toContain('·');
  });
  it('times out of order, newest first, repeated', async () => {
    const rows = clean();
    expect(only(await surveyOf([...rows.slice(600), ...rows.slice(0, 600)]), 'unordered')).toMatchObject({
      count: 1,
      from: '2024-01-01T00:00:00Z',
    });
    expect(only(await surveyOf(rows.toReversed()), 'unordered').sentence).toContain('newest first');
    expect(only(await surveyOf([...rows, ...rows.slice(40, 50)]), 'duplicates')).toMatchObject({
      count: 10,
      from: '2024-01-01T00:40:00Z',
    });
  });
  it('two years of one constant, nearly one, and a stretch of one', async () => {
    const years = Array.from({ length: 17_520 }, (_, n) => ({
      time: new Date(START + n * 3_600_000).toISOString(),
      level: '7.3',
      flow: String(n % 50),
    }));
    const constant = await surveyOf(years, site(['level', 'flow'], { tickMs: 3_600_000 }));
    expect(only(constant, 'constant')).toMatchObject({ signal: 'level', weight: 'serious', count: 17_520 });
    expect(constant.signals.map(({ isStill }) => isStill)).toEqual([true, false]);
    expect(only(await surveyOf(changed((_, n) => ({ level: n === 3 ? '8' : '7' }))), 'near-constant')).toMatchObject({
      count: 1,
    });
    const stuck = await surveyOf(changed((_, n) => (n >= 300 && n < 420 ? { level: '26.5' } : {})));
    expect(only(stuck, 'stuck')).toMatchObject({ signal: 'level', count: 1, from: '2024-01-01T05:00:00Z' });
    const hung = await surveyOf(changed((_, n) => (n >= 300 && n < 700 ? { level: '26.5' } : {})));
    expect(only(hung, 'stuck')).toMatchObject({ signal: 'level', count: 1, from: '2024-01-01T05:00:00Z' });
    const pump = await surveyOf(changed((_, n) => ({ level: n % 400 < 300 ? '0' : String(n % 7) })));
    expect(pump.findings.filter(({ kind }) => kind === 'stuck')).toEqual([]);
  });
  it('readings out of range, a single 1e12, a spike', async () => {
    const ranged = site([signal('level', { range: [0, 29] }), 'flow']);
    expect(only(await surveyOf(clean(), ranged), 'out-of-range').sentence).toContain('outside its range of 0 to 29 in');
    const wild = await surveyOf(changed((_, n) => (n === 77 ? { level: '1e12' } : {})));
    expect(only(wild, 'outliers')).toMatchObject({ signal: 'level', count: 1, from: '2024-01-01T01:17:00Z' });
    expect(wild.signals[0]!.greatest).toBe(30);
    const slow = await surveyOf(
      changed((_, n) => ({ level: n === 500 ? '90' : (20 + Math.abs((n % 40) - 20) / 10).toFixed(1) })),
    );
    expect(only(slow, 'spikes')).toMatchObject({ signal: 'level', count: 1, from: '2024-01-01T08:20:00Z' });
  });
  it('a declared resolution that does not hold, values without one', async () => {
    expect(
      only(await surveyOf(clean(), site([signal('level', { resolution: 0.5 }), 'flow'])), 'resolution'),
    ).toMatchObject({ weight: 'serious' });
    expect(only(await surveyOf(changed((_, n) => ({ level: String(Math.sin(n)) }))), 'resolution').sentence).toContain(
      'more digits than a sensor gives',
    );
  });
  it('copies, columns passed over, a tick that does not suit, an irregular clock', async () => {
    expect(only(await surveyOf(changed((row) => ({ flow: row.level }))), 'copies')).toMatchObject({
      signal: 'flow',
      count: LENGTH,
    });
    expect(only(await surveyOf(clean(), site(['level'])), 'columns').sentence).toContain('"flow"');
    const slow = await surveyOf(clean(), site(['level', 'flow'], { tickMs: 10_000 }));
    expect(only(slow, 'cadence')).toMatchObject({
      signal: null,
      weight: 'serious',
      sentence:
        'No signal is read more often than every 1 min, but the tick is 10 s: 83.3 % of the ticks have no reading.',
      advice: 'Take a tick of 1 min in the site file, and as many fewer ticks for the horizon.',
    });
    const one = await surveyOf(changed((_, n) => (n % 5 === 0 ? {} : { flow: '' })));
    expect(only(one, 'cadence')).toMatchObject({
      signal: 'flow',
      advice: 'Take a tick of 5 min in the site file, or keep this signal out.',
    });
    expect(slow.suggestedTickS).toBe(60);
    const wavering = await surveyOf(
      changed((_, n) => ({ time: new Date(START + n * 60_000 + ((n * n * 7) % 41) * 1000).toISOString() })),
    );
    expect(wavering.findings.some(({ sentence }) => sentence.includes('irregularly'))).toBe(true);
  });
});

describe('clock changes', () => {
  const local = (from: string, minutes: readonly number[]): Row[] =>
    minutes.map((minute, n) => ({
      time: new Date(Date.parse(`${from}Z`) + minute * 60_000).toISOString().slice(0, 19).replace('T', ' '),
      level: String(n % 13),
      flow: String(n % 17),
    }));
  const span = (from: number, to: number): number[] => Array.from({ length: to - from }, (_, n) => from + n);
  const asked = site(['level', 'flow'], { timeZone: 'Europe/London' });
  it('a logger that changed with the zone: resolved, no hour lost or doubled', async () => {
    const survey = await surveyOf(local('2024-10-27T00:00:00', [...span(0, 120), ...span(60, 180)]), asked);
    expect(survey).toMatchObject({ ticks: 240, zone: 'Europe/London', from: '2024-10-26T23:00:00Z' });
    expect(only(survey, 'clock-change')).toMatchObject({ weight: 'note', count: 120 });
    expect(survey.findings.map(({ kind }) => kind)).toEqual(['clock-change']);
  });
  it('a logger that never changed: said in spring and in autumn, with the offset to declare', async () => {
    const spring = only(await surveyOf(local('2024-03-31T00:00:00', span(0, 180)), asked), 'clock-change');
    expect(spring).toMatchObject({ weight: 'serious', count: 60 });
    expect(spring.advice).toContain('--time-zone +00:00');
    const autumn = only(await surveyOf(local('2024-10-27T00:00:00', span(0, 180)), asked), 'clock-change');
    expect(autumn.sentence).toContain('holds one pass only');
  });
  it('local times passed off as UTC: the step back of an hour is seen', async () => {
    const survey = await surveyOf(local('2024-10-27T00:00:00', [...span(0, 120), ...span(60, 180)]), asked, 'UTC');
    expect(only(survey, 'clock-set-back')).toMatchObject({ weight: 'serious', from: '2024-10-27T01:00:00Z' });
  });
});
