/** How far factors reach for a site, and what bank they serve. */
import { parseSite } from '@stillwell/protocol';
import { describe, expect, it } from 'vitest';
import { FactorsGatherer } from '../../../trainer/factors/gather.ts';
import { reachesMemories } from '../../../trainer/factors/moments.ts';
import { shapeOf } from '../../../trainer/factors/site-shape.ts';
import { designBank } from '../../../trainer/identify/bank.ts';

function shapeFor(tick: string, horizon: string, signals: number) {
  const names = Array.from({ length: signals }, (_, c) => `  - name: s${c}\n`).join('');
  const head = `site: a\nclass: b\ntime_zone: UTC\ntick: ${tick}\nhorizon: ${horizon}\n`;
  return shapeOf(parseSite(`${head}signals:\n${names}`), null);
}

describe('shapeOf', () => {
  it.each([
    ['1h', '48h', 24, [168]],
    ['15min', '12h', 96, []],
    ['5min', '4h', 288, []],
    ['1min', '1h', 1440, []],
  ] as const)('serves the bank of a site with ticks of %s', (tick, horizon, day, others) => {
    const shape = shapeFor(tick, horizon, 2);
    const steps = shape.longestHorizon / 2;
    const bank = designBank({
      periodTicks: day,
      otherPeriods: others,
      horizon: steps,
      learnTicks: 1e6,
      channelCount: 2,
    });
    expect(reachesMemories(new FactorsGatherer(shape).end(), bank)).toBe(true);
  });

  it('takes the longest round that bundles hold', () => {
    expect(shapeFor('1h', '48h', 2).longestRound).toBe(168);
    expect(shapeFor('5min', '4h', 2).longestRound).toBe(288);
    // A day of minutes is longer than any round may be.
    expect(shapeFor('1min', '1h', 2).longestRound).toBe(0);
  });

  it('reaches less far where pairs are very many', () => {
    expect(shapeFor('1min', '1h', 8).reach).toBe(138_240);
    expect(shapeFor('1min', '1h', 40).reach).toBeLessThan(50_000);
  });
});
