/** When warnings open and close, as a site file says it. */
import { describe, expect, test } from 'vitest';
import { parseSite } from '../../protocol/site.ts';
import { warnRuleOf } from '../../protocol/site-warn.ts';
import { refusalOf } from '../support/refusal.ts';

const siteWith = (siteWarn: string, signalWarn: string, horizon = '1h') =>
  parseSite(
    `site: a
time_zone: UTC
tick: 1min
horizon: ${horizon}
${siteWarn}
signals:
  - name: level
    limits: { high_high: 5, high: 4, low: 1 }
    ${signalWarn}
  - name: flow
`,
    'site.yaml',
  );

describe('the rule of a limit', () => {
  test('left out: as the table says', () => {
    const site = siteWith('', '');
    expect(site.warn).toEqual({ open: 0.5, close: 0.3, hold: 5 });
    expect(warnRuleOf(site, 0, 'high')).toEqual(site.warn);
    expect(siteWith('', '', '2').warn.hold).toBe(1);
  });

  test('the nearest word counts, and close follows open unless it is said too', () => {
    const site = siteWith(
      'warn: {open: 0.6, hold: 90s}',
      'warn: {close: 0.2, high: {open: 0.7}, low: {hold: 30, close: 0.1}}',
    );
    expect(site.warn).toEqual({ open: 0.6, close: 0.36, hold: 2 });
    expect(warnRuleOf(site, 0, 'highHigh')).toEqual({ open: 0.6, close: 0.2, hold: 2 });
    expect(warnRuleOf(site, 0, 'high')).toEqual({ open: 0.7, close: 0.42, hold: 2 });
    expect(warnRuleOf(site, 0, 'low')).toEqual({ open: 0.6, close: 0.1, hold: 30 });
    expect(warnRuleOf(site, 1, 'high')).toEqual(site.warn);
  });
});

describe('refused, with the place', () => {
  test.each([
    ['warn: {open: 0.3, close: 0.4}', '', '5:7: warn: expected close below open (0.3), got close 0.4'],
    ['warn: {open: 0}', '', '5:14: warn.open: expected a probability above 0 and at most 1, got 0'],
    ['warn: {open: 50}', '', 'warn.open: expected a probability above 0 and at most 1, got 50'],
    ['warn: {hold: 0}', '', 'warn.hold: expected a whole number of ticks from 1 up, or a duration such as "10min"'],
    ['warn: {hold: 1.5}', '', 'got 1.5'],
    ['warn: {opne: 0.5}', '', '5:8: warn.opne is not a known key; did you mean "open"?'],
    ['warn: on', '', 'warn: expected'],
    [
      '',
      'warn: {high: {open: 0.2, close: 0.2}}',
      'signals[0].warn.high: expected close below open (0.2), got close 0.2',
    ],
    ['', 'warn: {close: 0.8}', '9:11: signals[0].warn: expected close below open (0.5), got close 0.8'],
    [
      '',
      'warn: {low_low: {open: 0.2}}',
      'signals[0].warn.low_low: expected a limit that the signal has, got "low_low"',
    ],
    ['', 'warn: {high: {openn: 0.2}}', 'signals[0].warn.high.openn is not a known key; did you mean "open"?'],
    ['', 'warn: {hihg: {open: 0.2}}', 'signals[0].warn.hihg is not a known key; did you mean "high"?'],
  ])('%s %s', (ofSite, ofSignal, words) => {
    expect(refusalOf(() => siteWith(ofSite, ofSignal)).message).toContain(words);
  });
});
