import { describe, expect, it } from 'vitest';
import { parseSite } from '../../../protocol/index.ts';
import { LONG_FROM, RECENT_TICKS } from '../../../trainer/history/long-limits.ts';
import { BUNDLE, BYTES, PROBE_SECONDS, SECONDS } from '../../../trainer/sizing/constants.ts';
import { bundleWork, fitShape, memoryWork, timeWork } from '../../../trainer/sizing/fit-work.ts';
import type { Extent } from '../../../trainer/sizing/history-extent.ts';
import { predictFit } from '../../../trainer/sizing/predict-fit.ts';
import { probeSeconds } from '../../../trainer/sizing/probe.ts';

const siteOf = (signals: number, horizon = 24, inputs = 0) =>
  parseSite(
    `site: a\ntime_zone: UTC\ntick: 1min\nhorizon: ${horizon}\nsignals:\n${Array.from({ length: signals }, (_, k) => `  - {name: s${k}}\n`).join('')}` +
      (inputs === 0 ? '' : `inputs:\n${Array.from({ length: inputs }, (_, k) => `  - {name: u${k}}\n`).join('')}`),
  );
const extentOf = (ticks: number, channels: number): Extent => ({
  files: 1,
  bytes: 40 * ticks,
  textBytes: 40 * ticks,
  rows: ticks,
  readings: ticks * channels,
  ticks,
  fromMs: 0,
  toMs: (ticks - 1) * 60_000,
  isExact: true,
});
const options = { learnShare: 0.6, maxBytes: 24_576 };
const predict = (signals: number, ticks: number, horizon = 24) =>
  predictFit(siteOf(signals, horizon), extentOf(ticks, signals), { ...options, probe: PROBE_SECONDS });

describe('which way it goes', () => {
  it('a history of LONG_FROM ticks is held whole, one tick more is streamed but for the newest', () => {
    expect(predict(2, LONG_FROM)).toMatchObject({ way: 'in memory', shape: { recentTicks: LONG_FROM, olderTicks: 0 } });
    expect(predict(2, LONG_FROM + 1)).toMatchObject({
      way: 'streamed',
      shape: { recentTicks: RECENT_TICKS, olderTicks: LONG_FROM + 1 - RECENT_TICKS },
    });
  });

  it('memory and factors of a streamed history do not grow with it; time grows no faster than it', () => {
    const [short, long] = [predict(8, 1_000_000), predict(8, 10_000_000)];
    expect(long.peakBytes).toBe(short.peakBytes);
    expect(long.factorsBytes).toBe(short.factorsBytes);
    expect(long.seconds).toBeGreaterThan(short.seconds);
    expect(long.seconds).toBeLessThan(10 * short.seconds);
  });
});

describe('the matrices', () => {
  it('are of the widest bank, and of a window at each tick', () => {
    const { shape, covariance, gram } = predict(8, 64_000);
    expect(covariance.rows).toBe(8 * shape.features);
    expect(gram).toEqual({ rows: 64_000, entries: 4_096_000_000, bytes: 32_768_000_000 });
  });
});

describe('what is foreseen', () => {
  it('is finite, positive and rises with ticks, signals and horizon', () => {
    for (const key of ['peakBytes', 'seconds', 'bundleBytes'] as const) {
      const base = predict(4, 20_000)[key];
      expect(base).toBeGreaterThan(0);
      expect(predict(8, 20_000)[key]).toBeGreaterThan(base);
      expect(predict(4, 60_000)[key]).toBeGreaterThanOrEqual(base);
      expect(predict(4, 20_000, 96)[key]).toBeGreaterThanOrEqual(base);
    }
  });

  it('of a bundle never exceeds what it is limited to, and tightness is seen', () => {
    expect(predict(40, 64_000).bundleBytes).toBe(24_576);
    expect(predict(40, 64_000).shape.isTight).toBe(true);
    expect(predict(2, 64_000).shape.isTight).toBe(false);
  });

  it('of time goes with the speed of the machine', () => {
    const slow = predictFit(siteOf(2), extentOf(9000, 2), { ...options, probe: 3 * PROBE_SECONDS });
    expect(slow.seconds).toBeCloseTo(3 * predict(2, 9000).seconds, 9);
  });

  it('goes without factors where channels are too many, and without a thing where there is no history', () => {
    expect(predict(200, 64_000).factorsBytes).toBeNull();
    expect(fitShape(siteOf(2, 24, 3), extentOf(9000, 5), options)).toMatchObject({ signals: 2, inputs: 3 });
  });
});

describe('the constants', () => {
  const shape = fitShape(siteOf(3), extentOf(200_000, 3), options);
  it.each([
    ['SECONDS', SECONDS, timeWork(shape)],
    ['BYTES', BYTES, memoryWork(shape)],
    ['BUNDLE', BUNDLE, bundleWork(shape)],
  ])('%s: one for each kind of work that is counted, none below zero', (_, prices, work) => {
    expect(Object.keys(prices).sort()).toEqual(Object.keys(work).sort());
    for (const price of Object.values(prices)) expect(price).toBeGreaterThanOrEqual(0);
  });
});

describe('the probe', () => {
  it('takes a fraction of a second and gives a length of time', () => {
    const seconds = probeSeconds();
    expect(seconds).toBeGreaterThan(0);
    expect(seconds).toBeLessThan(1);
  });
});
