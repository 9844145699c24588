/** Time the survey suggests to exclude: what was planted, as YAML a site file takes; nothing in a history without it. */
import { describe, expect, it } from 'vitest';
import { parseSite } from '../../../protocol/index.ts';
import type { History } from '../../../trainer/history/history.ts';
import { prepare } from '../../../trainer/history/load.ts';
import { suggestionsText } from '../../../trainer/history/suggestions.ts';
import { surveyText } from '../../../trainer/history/survey-text.ts';
import { hourlySite, wanderingDays } from '../../support/history.ts';
import { seededNumbers } from '../../support/models.ts';

const HOUR = 3_600_000;
const FIRST = Date.UTC(2024, 0, 1);
const NAMES = ['level', 'flow', 'temp'];
const site = hourlySite(NAMES, 24);

function history(values: readonly Float64Array[]): History {
  const times = Float64Array.from({ length: values[0]!.length }, (_, t) => FIRST + t * HOUR);
  const channels = NAMES.map((name, c) => ({ name, times, values: values[c]! }));
  return { channels, signalCount: 3, files: [], zone: null, clockChanges: [] };
}

const suggested = (values: readonly Float64Array[], of = site) => prepare(history(values), of).survey.suggestions;

function changed(from: number, to: number, value: (c: number, t: number, usual: number) => number): Float64Array[] {
  return wanderingDays(3, 2400, 8).map((y, c) =>
    y.map((usual, t) => (t >= from && t < to ? value(c, t, usual) : usual)),
  );
}

describe('planted', () => {
  it('a sensor that hangs', () => {
    expect(suggested(changed(500, 560, (c, _, usual) => (c === 1 ? 25.5 : usual)))).toEqual([
      { from: '2024-01-21T20:00:00Z', to: '2024-01-24T08:00:00Z', signals: ['flow'], reason: 'stands still at 25.5' },
    ]);
  });

  it('a sensor at its stop', () => {
    expect(suggested(changed(500, 560, (c, _, usual) => (c === 0 ? 99 : usual)))[0]).toMatchObject({
      signals: ['level'],
      reason: 'stands still at 99 (its highest)',
    });
  });

  it('a logger that hangs: all signals in one entry', () => {
    expect(suggested(changed(500, 560, (c) => 20 + 5 * c))).toMatchObject([
      { signals: NAMES, reason: 'stands still at 20, 25, 30' },
    ]);
  });

  it('days of tests on the whole plant: unrest as on no other day', () => {
    const random = seededNumbers(3);
    const tests = changed(
      30 * 24 + 7,
      32 * 24 + 16,
      (c, t, usual) => usual + (Math.floor(t / 3) % 2 ? 6 : -6) * (c < 2 ? 1 : 0) + random(),
    );
    expect(suggested(tests)).toEqual([
      { from: '2024-01-31T00:00:00Z', to: '2024-02-03T00:00:00Z', signals: null, reason: 'unlike all other days' },
    ]);
  });
});

describe('not planted', () => {
  it.each([1, 2, 3, 4, 5, 6])('nothing is suggested, seed %i', (seed) => {
    expect(suggested(wanderingDays(3, 3000, seed))).toEqual([]);
  });

  it('nothing in a plant that often does this', () => {
    const often = wanderingDays(3, 2400, 8).map((y) =>
      y.map((usual, t) => (t % 240 < 24 ? usual + 40 * ((t % 3) - 1) : usual)),
    );
    expect(suggested(often)).toEqual([]);
  });
});

it('what is suggested may be pasted into the site file, which then suggests nothing more', () => {
  const values = changed(500, 560, (c, _, usual) => (c === 1 ? 25.5 : usual));
  const { survey } = prepare(history(values), site);
  const text = suggestionsText(survey.suggestions);
  expect(text).toBe(
    'exclude:\n  - {from: 2024-01-21T20:00:00Z, to: 2024-01-24T08:00:00Z, signals: [flow], reason: stands still at 25.5}',
  );
  expect(surveyText(survey)).toContain(`  ${text.replace('\n', '\n  ')}\n`);
  const { exclude } = parseSite(`site: a\ntime_zone: UTC\ntick: 1h\nhorizon: 24\nsignals: [{name: flow}]\n${text}\n`);
  expect(suggested(values, { ...site, exclude })).toEqual([]);
});
