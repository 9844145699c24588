/** Averages over signals must be over the same signals for the model and for every rival. */
import { expect, it } from 'vitest';
import type { Hindcast } from '../../../trainer/judge/hindcast.ts';
import { hindcastJson } from '../../../trainer/judge/hindcast-json.ts';

it('averages a rival over every signal, one that both forecast without error included', () => {
  const two = (a: number, b: number): Float64Array => Float64Array.of(a, b);
  const cast: Hindcast = {
    signals: ['level', 'still'],
    units: ['m', 'm'],
    horizon: 1,
    tickMs: 60_000,
    origins: 20,
    fromMs: 0,
    toMs: 1_200_000,
    rivals: ['persistence'],
    count: two(20, 20),
    mse: two(2, 0),
    mae: two(1, 0),
    bias: two(0, 0),
    mseStandardised: two(0.5, 0),
    maeStandardised: two(0.5, 0),
    rivalMse: two(4, 0),
    rivalMae: two(1, 0),
    scale: two(2, 1),
    nominalCoverage: 0.9,
    coverage: two(0.9, 1),
    width: two(1, 0),
    residuals: [],
    paths: [],
    readings: [],
    lossEvery: 1,
    originMs: Float64Array.from({ length: 20 }, (_, k) => k * 60_000),
    pathLoss: [2, 0].map((loss) => Float64Array.from({ length: 20 }, (_, k) => loss * (1 + 0.1 * Math.sin(k)))),
    rivalPathLoss: [4, 0].map((loss) => new Float64Array(20).fill(loss)),
    reliability: null,
  };
  const json = hindcastJson(cast) as Record<string, any>;
  expect(json.signals[0].verdict).toMatchObject({ skill: 0.5, against: 'persistence', stretches: { length: 8 } });
  expect(json.signals[0].verdict.test).toMatchObject({ origins: 20, variance: 'truncated' });
  expect(json.signals[1].verdict).toMatchObject({ skill: 0, against: 'persistence', test: null });
  // The sine is largest at 14 of 0 to 19.
  expect(json.worst_spells.all_signals[0]).toMatchObject({ from: '1970-01-01T00:14:00.000Z', origins: 1 });
  expect(json.crossings).toBeNull();
  // Standardised by scale 2: ours 2/4, theirs 4/4; averaged over two signals 0.25 and 0.5.
  const { average } = hindcastJson(cast) as { average: { mse_standardised: number; rivals: unknown } };
  expect(average.mse_standardised).toBe(0.25);
  expect(average.rivals).toEqual({ persistence: { mse_standardised: 0.5, skill: 0.5 } });
});
