/** The report: what it says at a glance, that the worst day comes first, and that nothing in it is undefined. */
import { beforeAll, describe, expect, test } from 'vitest';
import { spellName, worstSpells } from '../../../trainer/judge/worst-days.ts';
import { FIT_DEFAULTS, type FitResult, fit as fitHistory } from '../../../trainer/pipeline.ts';
import { leansOn, trustedSteps } from '../../../trainer/report/glance.ts';
import { fitReport } from '../../../trainer/report/page.ts';
import { hourlySite, seriesOf, wanderingDays } from '../../support/history.ts';

const names = ['level', 'flow'];
const site = hourlySite(names, 12, []);
const DAY = 24;

let result: FitResult;
let page: string;

beforeAll(async () => {
  const values = wanderingDays(2, 1500, 5);
  // One day of the judged part goes its own way: hour 1320 is the start of a day of ticks since 1970.
  const series = seriesOf(names, values);
  const from = 1320 - ((series.firstTick + 1320) % DAY);
  for (let t = from; t < from + DAY; t++) values[0]![t] = values[0]![t]! + 40 * Math.sin(t);
  const lattices = names.map(() => ({ step: 0.01, offset: 0 }));
  result = await fitHistory({ series, site, survey: {}, lattices }, { ...FIT_DEFAULTS, kind: 'linear' });
  const survey = { findings: [] } as unknown as Parameters<typeof fitReport>[0]['survey'];
  page = fitReport({ site, survey, result });
});

/** Text between a tag's first appearance after some words and its end, tags inside taken out. */
function textOf(tag: string, after = '<body>'): string {
  const from = page.indexOf(`<${tag}`, page.indexOf(after));
  return page.slice(from, page.indexOf(`</${tag.split(' ')[0]}>`, from)).replace(/<[^>]*>/g, ' ');
}

describe('the page', () => {
  test('says first whether it may be trusted, then what is wrong, then how far ahead', () => {
    expect([...page.matchAll(/<h2>([^<]*)<\/h2>/g)].slice(0, 3).map(([, words]) => words)).toEqual([
      'At a glance',
      'What was found wrong in the history',
      'How far ahead it can be trusted',
    ]);
    expect(textOf('p class="verdict').trim()).toContain(result.verdicts.sentence);
    expect(textOf('p class="caution')).toMatch(/Not a safety function/);
  });

  test('names the day that went its own way as the worst, and the signal that stood out', () => {
    const from = 1320 - ((result.learn.fromTick + 1320) % DAY);
    const worst = new Date((result.learn.fromTick + from) * 3_600_000).toISOString().slice(0, 10);
    const first = textOf(
      'tr',
      page.slice(page.indexOf('<tbody>', page.indexOf('The worst of it first'))).slice(0, 200),
    );
    // Forecasts begun on the evening before reach into it, too.
    const before = new Date(Date.parse(worst) - 86_400_000).toISOString().slice(0, 10);
    expect([worst, before].some((day) => first.includes(day))).toBe(true);
    expect(first).toContain('level');
    const { overall, spellMs } = worstSpells(result.hindcast, 1);
    expect(first).toContain(spellName(overall[0]!.fromMs, spellMs));
  });

  test('says what time before the window was learned from', () => {
    expect(page).not.toContain('by their factors');
    const earlier = { fromTick: result.learn.fromTick - 9000, toTick: result.learn.fromTick, ticks: 8760 };
    const survey = { findings: [] } as unknown as Parameters<typeof fitReport>[0]['survey'];
    const long = fitReport({ site, survey, result: { ...result, earlier } });
    expect(long).toMatch(/learned from 8760 ticks before that, since \d{4}-\d\d-\d\d/);
    expect(long).toMatch(/by their factors from<\/t[dh]><td[^>]*>[^<]* to [^<]*, 8760 ticks/);
  });

  test('holds no number that is none, and loads nothing from elsewhere', () => {
    expect(page.replace(/<[^>]*>/g, ' ')).not.toMatch(/NaN|undefined|null|Infinity/);
    expect(page).not.toMatch(/<(script|link|img|iframe)/);
    expect(page.split('<svg').length).toBeGreaterThan(7);
  });
});

describe('at a glance', () => {
  test('a rival that is better from some step on ends the reach there', () => {
    const { hindcast } = result;
    const cells = hindcast.mse.length;
    // Made up of the real one: ours half of every rival at all steps, then one rival without error from step 7 on.
    const rivalMse = hindcast.rivalMse.map((_, k) => 2 * hindcast.mse[k % cells]!);
    expect(trustedSteps({ ...hindcast, rivalMse }, 1)).toBe(12);
    rivalMse.fill(0, cells - 6, cells);
    expect(trustedSteps({ ...hindcast, rivalMse }, 1)).toBe(6);
    expect(trustedSteps({ ...hindcast, rivalMse }, 0)).toBe(12);
    expect(trustedSteps({ ...hindcast, rivalMse: new Float64Array(rivalMse.length) }, 0)).toBe(0);
  });

  test('leans on others alone, the dearest first', () => {
    const channels = ['a', 'b', 'c', 'd'];
    const ratio = Float64Array.of(9, 1.2, 1.01, 1.5);
    expect(leansOn({ channels, ratio, origins: 1 }, 0).map(({ name }) => name)).toEqual(['d', 'b']);
  });
});
