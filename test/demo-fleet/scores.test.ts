import { describe, expect, it } from 'vitest';
import { Scorer } from '../../demo-fleet/scores.ts';

const FIRST = 1000;
const wave = (tick: number): number => Math.sin((2 * Math.PI * tick) / 24) + tick / 500;

/** Plays `ticks` readings; each origin's forecast is `forecast(origin, h)` ± 0.5. */
function play(ticks: number, forecast: (origin: number, h: number) => number, gapAt = -1): Scorer {
  const scorer = new Scorer({ signals: 1, horizon: 6, period: 24, firstTick: FIRST });
  for (let k = 0; k < ticks; k++) {
    const tick = FIRST + k;
    scorer.addReadings(Float64Array.of(k === gapAt ? Number.NaN : wave(tick), 99));
    const path = new Float64Array(18);
    for (let h = 1; h <= 6; h++) {
      const middle = forecast(tick, h);
      path[h - 1] = middle;
      path[5 + h] = middle - 0.5;
      path[11 + h] = middle + 0.5;
    }
    if (k >= 30) scorer.addForecast(tick, 'all', path);
  }
  return scorer;
}

describe('the scorer', () => {
  it('gives full skill and coverage to forecasts that come true', () => {
    const score = play(100, (origin, h) => wave(origin + h)).score('all', [1]);
    expect(score?.pairs).toBe((100 - 30 - 6) * 6);
    expect(score?.mse).toBeCloseTo(0, 12);
    expect(score?.skill).toBeCloseTo(1, 12);
    expect(score?.coverage).toBe(1);
    expect(score?.bestRival).toBe('seasonal persistence');
    // Seasonal persistence misses the trend of one period: (24/500)².
    expect(score?.rivalMse[1]).toBeCloseTo((24 / 500) ** 2, 12);
  });

  it('gives none to a forecast that is a rival itself', () => {
    const score = play(100, (origin, h) => wave(origin + h - 24)).score('all', [1]);
    expect(score?.skill).toBeCloseTo(0, 12);
  });

  it('gives less than none to a worse one, and counts what falls outside', () => {
    const score = play(100, (origin, h) => wave(origin + h) + 3).score('all', [1]);
    expect(score?.skill).toBeLessThan(0);
    expect(score?.coverage).toBe(0);
  });

  it('measures error in the signal’s own deviations', () => {
    const scorer = play(100, (origin, h) => wave(origin + h) + 3);
    expect(scorer.score('all', [2])?.mse).toBeCloseTo(9 / 4, 9);
    expect(scorer.score('all', [1])?.mse).toBeCloseTo(9, 9);
  });

  it('leaves out pairs without a reading, and the pairs whose rival needs it', () => {
    const complete = play(120, (origin, h) => wave(origin + h)).score('all', [1]);
    const score = play(120, (origin, h) => wave(origin + h), 60).score('all', [1]);
    // Six origins aim at the gap; six more ask for it a period later.
    expect((complete?.pairs ?? 0) - (score?.pairs ?? 0)).toBe(12);
  });

  it('passes over a second forecast of the same origin, and knows no score without forecasts', () => {
    const scorer = play(100, (origin, h) => wave(origin + h));
    const before = scorer.score('all', [1])?.pairs;
    scorer.addForecast(FIRST + 50, 'all', new Float64Array(18));
    expect(scorer.score('all', [1])?.pairs).toBe(before);
    expect(scorer.score('other', [1])).toBeNull();
  });
});
