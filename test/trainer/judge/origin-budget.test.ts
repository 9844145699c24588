/** Thinning of origins: none below the budget, and above it scores that say the same. */
import { describe, expect, test } from 'vitest';
import { hindcast } from '../../../trainer/judge/hindcast.ts';
import { scoreEvery } from '../../../trainer/judge/origin-budget.ts';
import { replayError, replayMse } from '../../../trainer/judge/replay-scores.ts';
import { auditErrors } from '../../../trainer/quantise/audit.ts';
import { seriesOf } from '../../support/history.ts';
import { syntheticModel, syntheticReadings } from '../../support/models.ts';

test.each([
  [1, 1],
  [6000, 1],
  [6001, 2],
  [12_741, 3],
])('of %d origins every %d. is scored', (origins, every) => expect(scoreEvery(origins)).toBe(every));

describe('a hindcast of more origins than are scored', () => {
  const model = syntheticModel({ horizon: 6 });
  const readings = syntheticReadings(model, 7000, 3);
  const values = [0, 1].map((c) => Float64Array.from(readings, (row) => row[c]!));
  const series = seriesOf(['level', 'flow'], values);
  const ofTicks = (ticks: number) => {
    const span = { fromTick: series.firstTick + 500, toTick: series.firstTick + 500 + ticks };
    return hindcast(model, series, { ...span, learn: null }, ['m', 'm']);
  };
  const whole = ofTicks(6005);
  const thinned = ofTicks(6400);

  test('scores every origin up to the budget, every other one above it', () => {
    expect([whole.origins, whole.lossEvery]).toEqual([6000, 1]);
    expect([thinned.origins, thinned.lossEvery]).toEqual([3198, 2]);
    expect(thinned.pathLoss[0]).toHaveLength(3198);
    expect(thinned.originMs[1]! - thinned.originMs[0]!).toBe(2 * series.tickMs);
  });

  test('errs by as much as over all origins, within a fiftieth', () => {
    const all = replayMse(model, series, { fromTick: 500, toTick: 6900 });
    for (const [cell, mse] of thinned.mseStandardised.entries()) {
      expect(Math.abs(mse / all[cell]! - 1)).toBeLessThan(0.02);
    }
  });

  test('keeps the residual of every tick', () => {
    expect(thinned.residuals[0]).toHaveLength(6400);
    expect(thinned.residuals[0]!.every((residual) => !Number.isNaN(residual))).toBe(true);
  });

  test('is audited on its end alone, both models on the same origins', () => {
    const known = replayMse(model, series, { fromTick: 500, toTick: 6505 });
    const coarse = { ...model, bottleneck: model.bottleneck.map((weight) => 1.05 * weight) };
    const short = auditErrors(model, coarse, series, { fromTick: 500, toTick: 6500 }, known);
    expect(short.quantisedMse).toBeCloseTo(known.reduce((sum, mse) => sum + mse, 0) / known.length, 12);
    expect(short.floatMse).toBe(replayError(coarse, series, { fromTick: 500, toTick: 6500 }));
    const long = auditErrors(model, coarse, series, { fromTick: 500, toTick: 6900 }, known);
    expect(long.quantisedMse).toBeCloseTo(replayError(model, series, { fromTick: 4894, toTick: 6900 }), 6);
    expect(Math.abs(long.ratio / short.ratio - 1)).toBeLessThan(0.01);
  });
});
