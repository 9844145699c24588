import { describe, expect, it } from 'vitest';
import { fleetJson } from '../../../trainer/fleet/fleet-json.ts';
import { fleetPage } from '../../../trainer/fleet/fleet-page.ts';
import { fleetLine } from '../../../trainer/fleet/fleet-progress.ts';
import { fleetText } from '../../../trainer/fleet/fleet-text.ts';
import type { FleetResult } from '../../../trainer/fleet/run-fleet.ts';
import type { SiteFacts } from '../../../trainer/fleet/site-facts.ts';

const facts = (site: string, more: Partial<SiteFacts> = {}): SiteFacts => ({
  site,
  class: 'wet-well',
  tick_ms: 60_000,
  horizon: 30,
  signal_count: 2,
  input_count: 0,
  ticks: 5000,
  from_ms: 0,
  to_ms: 3e8,
  kind: 'linear',
  model: '4 states',
  bundle_bytes: 5120,
  has_skill: true,
  mean_skill: 0.4,
  verdict: 'Better than the obvious guesses.',
  nominal_coverage: 0.9,
  coverage: 0.91,
  signals: [],
  skill_by_step: [
    { step: 1, skill: 0.5 },
    { step: 30, skill: 0.3 },
  ],
  warnings: [],
  survey_notes: [],
  ...more,
});
const fitted = (site: string, more: Partial<SiteFacts> = {}, isUnchanged = false): FleetResult => ({
  label: site,
  facts: facts(site, more),
  isUnchanged,
  problem: null,
});
const failed = (label: string, problem: string): FleetResult => ({ label, facts: null, problem });

describe('the page', () => {
  const page = fleetPage([
    fitted('strong', { mean_skill: 0.6 }),
    fitted('weak', { mean_skill: -0.2, has_skill: false, coverage: 0.7, warnings: ['No period was found.'] }),
    fitted('mute', { mean_skill: null, has_skill: false, coverage: null, skill_by_step: [{ step: 1, skill: null }] }),
    failed('broken', 'log.csv: <b>no</b> such file'),
  ]);

  it('puts what failed first, then the weakest', () => {
    const links = ['mute', 'weak', 'strong'].map((site) => `href="${site}/report.html"`);
    const places = ['broken', ...links].map((word) => page.indexOf(word));
    expect(places.every((place) => place > 0)).toBe(true);
    expect([...places].sort((a, b) => a - b)).toEqual(places);
  });

  it('says what matters in one sentence, links to each report, and escapes what files say', () => {
    expect(page).toContain(
      'At 1 of 4 sites forecasts beat the obvious guesses; at 2 they do not, which cannot be sealed as they are; 1 could not be fitted.',
    );
    expect(page).toContain('href="strong/report.html"');
    expect(page).toContain('log.csv: &lt;b&gt;no&lt;/b&gt; such file');
    expect(page).toContain('<summary>1 note</summary>');
  });

  it('holds nothing that is no number, also where nothing was judged', () => {
    for (const one of [
      page,
      fleetPage([failed('a', 'x')]),
      fleetPage([fitted('mute', { mean_skill: null, coverage: null, skill_by_step: [] })]),
    ])
      expect(one).not.toMatch(/NaN|Infinity|undefined|null/);
  });
});

describe('the summary', () => {
  const results = [fitted('a'), fitted('b', {}, true), fitted('c', { has_skill: false }), failed('d', 'no history')];

  it('has a row a site, a sentence for each that failed, and the counts', () => {
    const text = fleetText(results);
    expect(text).toMatch(/^ {2}b +ready, as before +40\.0 % +91\.0 % +5\.0 KiB +linear +0$/m);
    expect(text).toMatch(/^ {2}c +no skill/m);
    expect(text).toMatch(/^Failed: d: no history$/m);
    expect(text).toContain('4 sites: 2 with skill, 1 without, 1 unchanged and not fitted again, 1 failed; mend them');
  });

  it('as JSON does not tell what was fitted now from what stood', () => {
    const standing = results.map((one) => (one.facts === null ? one : { ...one, isUnchanged: true }));
    expect(fleetJson(standing)).toEqual(fleetJson(results));
    expect(fleetJson(results)).toMatchObject({ fitted: 3, with_skill: 2, failed: 1 });
  });
});

describe('the progress line', () => {
  it.each([
    [0, new Map(), 0, 'fleet: 0 of 9 sites done'],
    [
      3,
      new Map([
        ['north', 'judging'],
        ['south', 'reading'],
      ]),
      0.25,
      'fleet: 3 of 9 sites done, about 30 s left; running north (judging), south (reading)',
    ],
    [9, new Map(), 1, 'fleet: 9 of 9 sites done'],
  ])('%i done', (done, running, share, line) => {
    expect(fleetLine(done, 9, running, share, 10_000)).toBe(line);
  });
});
