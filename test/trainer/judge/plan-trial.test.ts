import { describe, expect, test } from 'vitest';
import { hindcast } from '../../../trainer/judge/hindcast.ts';
import { type PlanTrial, plannerOf } from '../../../trainer/judge/plan-trial.ts';
import { planWorth, planWorthJson } from '../../../trainer/judge/plan-worth.ts';
import { syntheticModel } from '../../support/models.ts';

const H = 4;
const TICKS = 200;
const choice = { signals: ['level'], inputs: ['pump', 'lamp'], horizon: H, seasonalPeriod: 24 } as const;
const model = syntheticModel({ ...choice, response: true });
const units = (c: number, z: number): number => model.mean[c]! + model.scale[c]! * z;
/** Input 0 counts the ticks, input 1 too, with a hole. */
const series = {
  tickMs: 60_000,
  firstTick: 1000,
  ticks: TICKS,
  names: ['level', 'pump', 'lamp'],
  signalCount: 1,
  values: [0, 1, 2].map((c) =>
    Float64Array.from({ length: TICKS }, (_, t) =>
      c === 2 && t >= 100 && t < 103 ? Number.NaN : units(c, c === 0 ? Math.sin(t / 5) : t / 100),
    ),
  ),
  digest: new Uint8Array(32),
};
const span = { fromTick: 50, toTick: 150 };
const told = (trial: PlanTrial, at: number, planned = [0]): number[] => {
  const out = new Float64Array(2 * H);
  plannerOf(trial, model, series, span, planned)!(at, out);
  // Back to the tick that each number is of.
  return Array.from(out, (z) => Math.round(z * 100));
};
const no = Number.NaN;

describe('plans told to a replay', () => {
  test('none is none', () => expect(plannerOf('none', model, series, span, [0])).toBeNull());

  test('the true future, of the planned inputs alone, up to the end of the span', () => {
    expect(told('perfect', 60)).toEqual([61, 62, 63, 64, no, no, no, no]);
    expect(told('perfect', 60, [1])).toEqual([no, no, no, no, 61, 62, 63, 64]);
    expect(told('perfect', 147)).toEqual([148, 149, no, no, no, no, no, no]);
    expect(told('perfect', 10)).toEqual([11, 12, 13, 14, no, no, no, no]);
  });

  test('over a missing reading the last value holds', () => {
    expect(told('perfect', 98, [1]).slice(H)).toEqual([99, 99, 99, 99]);
  });

  test('a wrong one is of another time of the span, and out of step with the day', () => {
    const wrong = told('wrong', 60).slice(0, H);
    // 40 ticks of the 100 are one day of 24 and 0.37 of another.
    expect(wrong).toEqual([61, 62, 63, 64].map((tick) => tick + 24 + 9));
    expect(told('wrong', 130).slice(0, H)).toEqual([131, 132, 133, 134].map((tick) => 50 + ((tick - 50 + 33) % 100)));
  });
});

describe('what plans are worth', () => {
  test('the same origins three times; without a response there is nothing to say', () => {
    const worth = planWorth(model, series, span, [0, 1])!;
    expect(worth.inputs).toEqual(['pump', 'lamp']);
    expect(worth.origins).toBe(97);
    for (const { mse, mean } of Object.values(worth.trials)) {
      expect(mse.every(Number.isFinite)).toBe(true);
      expect(mean).toHaveLength(1);
    }
    expect(worth.trials.perfect.mean).not.toEqual(worth.trials.none.mean);
    expect(worth.trials.wrong.mean).not.toEqual(worth.trials.perfect.mean);
    expect(planWorthJson(worth)).toMatchObject({
      under_plans: { inputs: ['pump', 'lamp'], signals: [{ signal: 'level' }] },
    });
    expect(planWorth(syntheticModel(choice), series, span, [0, 1])).toBeNull();
    expect(planWorth(model, series, span, [])).toBeNull();
    expect(planWorthJson(null)).toEqual({});
  });

  test('a hindcast may be told a plan, and is then the same as the figures above', () => {
    const ticks = { fromTick: series.firstTick + 50, toTick: series.firstTick + 150, learn: null };
    const plain = hindcast(model, series, ticks, ['m', '1', '1']);
    const under = hindcast(model, series, { ...ticks, plan: { trial: 'perfect', inputs: [0, 1] } }, ['m', '1', '1']);
    const worth = planWorth(model, series, span, [0, 1])!;
    for (let k = 0; k < H; k++) {
      expect(plain.mseStandardised[k]).toBeCloseTo(worth.trials.none.mse[k]!, 12);
      expect(under.mseStandardised[k]).toBeCloseTo(worth.trials.perfect.mse[k]!, 12);
    }
    expect(under.rivalMse).toEqual(plain.rivalMse);
  });
});
