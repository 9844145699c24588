import { describe, expect, it } from 'vitest';
import { parseSite } from '../../../protocol/index.ts';
import { predictFit } from '../../../trainer/sizing/predict-fit.ts';
import { durationText, fitText, kernelText } from '../../../trainer/sizing/size-text.ts';

const site = parseSite(
  'site: mill-lane\ntime_zone: UTC\ntick: 1min\nhorizon: 24\nsignals: [{name: level}, {name: flow}]\n',
);
const TICKS = 1_000_000;
const extent = {
  files: 3,
  bytes: 4e7,
  textBytes: 4e7,
  rows: TICKS,
  readings: 2 * TICKS,
  ticks: TICKS,
  fromMs: 0,
  toMs: (TICKS - 1) * 60_000,
  isExact: false,
};
const fit = predictFit(site, extent, { learnShare: 0.6, maxBytes: 24_576, probe: 0.01 });

describe('of a long history', () => {
  it('says that it streams, how much stays in memory, and that figures are about', () => {
    const text = fitText(site.site, extent, fit, 8e9);
    expect(text).toMatch(/^mill-lane: about 1,000,000 ticks of 2 channels, fitted as they stream past: about /);
    expect(text).toContain('the newest 64,000 ticks in memory, 936,000 older ones stream past');
    expect(text).toContain('1,000,000 x 1,000,000: 1.00e+12 entries, 8.00 TB');
    expect(text).toMatch(/factors +[\d.]+ MB, however long the history/);
  });

  it('says where more memory is needed than is free', () => {
    const text = fitText(site.site, extent, fit, 1e8);
    expect(text).toMatch(/^mill-lane: .*, which is more than is free\.$/m);
    expect(text).toContain('only 100 MB are free');
  });
});

it('says whether the fast loops are there', () => {
  expect(kernelText(true)).toMatch(/has WebAssembly SIMD/);
  expect(kernelText(false)).toMatch(/has no WebAssembly SIMD: .* with the same results, several times slower/);
});

it.each([
  [0.25, '0.3 s'],
  [9.4, '9.4 s'],
  [61, '61 s'],
  [150, '3 min'],
  [9000, '2.5 h'],
])('%d seconds are %s', (seconds, text) => {
  expect(durationText(seconds)).toBe(text);
});
