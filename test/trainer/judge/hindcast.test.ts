/**
 * Hindcast numbers by a second, slow route: at every origin the filter is started anew and run up to it, each rival written
 * out from its definition, every pair gathered and averaged. And that nothing which is learned has seen what is judged.
 */
import { describe, expect, it } from 'vitest';
import { createState, forecastPath, type Model, settlingTicksOf, update } from '../../../runtime/filter/index.ts';
import { type Hindcast, hindcast } from '../../../trainer/judge/hindcast.ts';
import { carryForward, makeRivals } from '../../../trainer/judge/rivals.ts';
import { FIT_DEFAULTS, type FitResult, fit as fitHistory } from '../../../trainer/pipeline.ts';
import { hourlySite, seriesOf, wanderingDays } from '../../support/history.ts';

const names = ['level', 'flow'];
const H = 6;
// 560 hours lie before the first origin: three weeks and more.
const RIVALS = ['persistence', 'seasonal persistence', 'weekly persistence', 'drift', 'window ridge'];
const site = hourlySite(names, H);
const values = wanderingDays(2, 700, 4);
for (const [c, t] of [
  [0, 600],
  [0, 601],
  [1, 640],
  [1, 655],
] as const)
  values[c]![t] = Number.NaN;
// Gaps in the learning part, and over the ends of the learning (420) and the calibration part (560).
values[0]!.fill(Number.NaN, 200, 230);
values[0]!.fill(Number.NaN, 415, 424);
values[1]!.fill(Number.NaN, 557, 562);
const series = seriesOf(names, values);
const lattices = [
  { step: 0.01, offset: 0 },
  { step: 0.01, offset: 0 },
];
// The kind is not what is tested here.
const OPTIONS = { ...FIT_DEFAULTS, kind: 'linear' } as const;
const result: FitResult = await fitHistory({ series, site, survey: {}, lattices }, OPTIONS);

function slowPath(model: Model, origin: number): Float64Array {
  const warm = Math.max(model.warmupTicks, settlingTicksOf(model));
  const first = Math.max(0, result.judged.fromTick - series.firstTick - 1 - warm);
  const state = createState(model);
  for (let t = first; t <= origin; t++) {
    update(
      model,
      state,
      series.firstTick + t,
      Float64Array.from(values, (y) => y[t]!),
    );
  }
  const path = new Float64Array(2 * H);
  forecastPath(model, state, path);
  return path;
}

const mean = (numbers: readonly number[]): number => numbers.reduce((sum, value) => sum + value, 0) / numbers.length;

describe('hindcast', () => {
  const cast: Hindcast = result.hindcast;
  const from = result.judged.fromTick - series.firstTick;
  const origins = Array.from({ length: 700 - H - from + 1 }, (_, k) => from - 1 + k);

  it('scores what the filter would have said, origin by origin', () => {
    expect(cast.origins).toBe(origins.length);
    const paths = origins.map((origin) => slowPath(result.model, origin));
    for (let i = 0; i < 2; i++) {
      for (const h of [1, 3, H]) {
        const errors = origins.flatMap((origin, k) => {
          const reading = values[i]![origin + h]!;
          return Number.isNaN(reading) ? [] : [paths[k]![i * H + h - 1]! - reading];
        });
        const cell = i * H + h - 1;
        expect(cast.count[cell]).toBe(errors.length);
        expect(cast.mse[cell]!).toBeCloseTo(mean(errors.map((e) => e * e)), 12);
        expect(cast.mae[cell]!).toBeCloseTo(mean(errors.map(Math.abs)), 12);
        expect(cast.bias[cell]!).toBeCloseTo(mean(errors), 12);
        const scale = result.model.scale[i]!;
        expect(cast.mseStandardised[cell]!).toBeCloseTo(mean(errors.map((e) => (e / scale) ** 2)), 12);
      }
    }
  });

  it('scores persistence, the day and the week before and drift by their definitions', () => {
    expect(cast.rivals).toEqual(RIVALS);
    const last = values.map((y, i) => carryForward(y, result.model.mean[i]!));
    const learnTicks = result.learn.toTick - result.learn.fromTick;
    const forecasts: ((i: number, t: number, h: number) => number)[] = [
      (i, t) => last[i]![t]!,
      (i, t, h) => last[i]![t + h - 24]!,
      (i, t, h) => last[i]![t + h - 168]!,
      (i, t, h) => last[i]![t]! + (h * (last[i]![learnTicks - 1]! - last[i]![0]!)) / (learnTicks - 1),
    ];
    forecasts.forEach((forecast, r) => {
      for (let i = 0; i < 2; i++) {
        for (const h of [1, H]) {
          const errors = origins.flatMap((t) => {
            const reading = values[i]![t + h]!;
            return Number.isNaN(reading) ? [] : [forecast(i, t, h) - reading];
          });
          const cell = r * 2 * H + i * H + h - 1;
          expect(cast.rivalMse[cell]!).toBeCloseTo(mean(errors.map((e) => e * e)), 12);
        }
      }
    });
  });

  it('keeps the loss of every path, ours and a rival’s, by origin', () => {
    for (const k of [0, 37, 80]) {
      const path = slowPath(result.model, origins[k]!);
      const ahead = Array.from({ length: H }, (_, h) => values[1]![origins[k]! + h + 1]!);
      const known = ahead.flatMap((y, h) => (Number.isNaN(y) ? [] : [(path[H + h]! - y) ** 2]));
      expect(cast.pathLoss[1]![k]).toBeCloseTo(mean(known), 12);
      const last = carryForward(values[1]!, 0)[origins[k]!]!;
      const rival = ahead.flatMap((y) => (Number.isNaN(y) ? [] : [(last - y) ** 2]));
      expect(cast.rivalPathLoss[1]![k]).toBeCloseTo(mean(rival), 12);
      expect(cast.originMs[k]).toBe((series.firstTick + origins[k]!) * series.tickMs);
    }
    expect(cast.reliability).toMatchObject({ isDeclared: false, limits: 8 });
    expect(cast.reliability!.count).toBeGreaterThan(100);
  });

  it('keeps residuals one tick after their forecast, and none where the reading is missing', () => {
    const at = 610 - from;
    expect(cast.residuals[0]![at]!).toBeCloseTo(values[0]![610]! - slowPath(result.model, 609)[0]!, 10);
    expect(Number.isNaN(cast.residuals[0]![600 - from]!)).toBe(true);
    expect(cast.readings[0]![at]).toBe(values[0]![610]);
  });

  it('refuses a span without a whole horizon', () => {
    const end = series.firstTick + series.ticks;
    const units = ['1', '1'];
    expect(() => hindcast(result.model, series, { fromTick: end - H + 1, toTick: end, learn: null }, units)).toThrow(
      RangeError,
    );
  });

  it('scores two models under the clips of one where asked', () => {
    const end = series.firstTick + series.ticks;
    const span = { fromTick: end - 60, toTick: end, learn: null };
    const tight = { ...result.model, clipHigh: result.model.mean.slice() };
    const own = hindcast(tight, series, span, ['1', '1']);
    const same = hindcast(tight, series, { ...span, clipAs: result.model }, ['1', '1']);
    expect(own.readings[0]!.some((value) => value > tight.clipHigh[0]!)).toBe(false);
    expect(same.readings[0]).toEqual(values[0]!.slice(700 - 60));
    expect(same.mse[0]!).toBeGreaterThan(own.mse[0]!);
  });

  it('leaves out rivals that would have to learn where the learning part is not there', () => {
    const end = series.firstTick + series.ticks;
    const cast = hindcast(result.model, series, { fromTick: end - 60, toTick: end, learn: null }, ['1', '1']);
    expect(cast.rivals).toEqual(RIVALS.slice(0, 3));
  });
});

describe('what is judged', () => {
  // Another judged part altogether: nothing learned, calibrated or scaled may move.
  const other = values.map((y) =>
    y.map((value, t) => (t >= result.judged.fromTick - series.firstTick ? 35 - value : value)),
  );

  it('is seen by nothing that is learned', async () => {
    const again = await fitHistory({ series: seriesOf(names, other), site, survey: {}, lattices }, OPTIONS);
    expect(again.bundle.linear).toEqual(result.bundle.linear);
    expect(again.bundle.bounds).toEqual(result.bundle.bounds);
    expect(again.bundle.channels).toEqual(result.bundle.channels);
    expect(again.bundle.seasonal).toEqual(result.bundle.seasonal);
    expect(again.bundle.guard).toEqual(result.bundle.guard);
    expect(again.hindcast.mse).not.toEqual(result.hindcast.mse);
  });

  it('is seen by no rival before its time', () => {
    const learn = { fromTick: 0, toTick: result.learn.toTick - series.firstTick };
    const rivalsOf = (of: readonly Float64Array[]) => {
      const carried = of.map((y) => carryForward(y, 20));
      return makeRivals({
        carried,
        taught: carried,
        horizon: H,
        periodTicks: 24,
        tickMs: 3_600_000,
        knownTicks: 560,
        learn,
      });
    };
    const origin = result.judged.fromTick - series.firstTick - 1;
    const paths = (of: readonly Float64Array[]): number[][] =>
      rivalsOf(of).map((rival) => {
        const path = new Float64Array(H);
        rival.forecast(1, origin, path);
        return Array.from(path);
      });
    expect(paths(other)).toEqual(paths(values));
  });
});
