/** The guard, judged where it is set: what it passes over of sound readings is counted, and it opens where that costs. */
import { describe, expect, it } from 'vitest';
import type { Series } from '../../../trainer/history/series.ts';
import { calibrate } from '../../../trainer/judge/calibrate.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seriesOf } from '../../support/history.ts';
import { seededNumbers, syntheticModel } from '../../support/models.ts';

const TICKS = 3000;
const H = 6;
const base = syntheticModel({ signals: ['level'], horizon: H, rejectSd: 1e12, rejectMaxTicks: 0 });
const model = {
  ...base,
  readout: new Float64Array(base.readout.length),
  clipLow: Float64Array.of(-1e4),
  clipHigh: Float64Array.of(1e4),
};

/** Persistence of a wander, with something added. */
const history = (added: (t: number) => number): Series => {
  const normal = gaussians(seededNumbers(3));
  let level = 10;
  const y = Float64Array.from({ length: TICKS }, (_, t) => {
    level += 0.1 * normal();
    return level + added(t);
  });
  return seriesOf(['level'], [y]);
};
const set = (series: Series) => calibrate(model, series, { fromTick: 600, toTick: TICKS }, 0.9);

describe('the guard', () => {
  it('stands at ten robust deviations where nothing lies beyond', () => {
    expect(set(history(() => 0))).toMatchObject({ rejectSd: 10, passedOver: 0, guardCost: 0 });
  });

  it('counts spikes it passes over, and that this helps', () => {
    const { rejectSd, passedOver, guardCost } = set(history((t) => (t % 300 === 50 ? 20 : 0)));
    expect(rejectSd).toBe(10);
    expect(passedOver).toBe(8);
    expect(guardCost).toBeLessThan(0);
  });

  it('opens where sound readings jump and stay', () => {
    // A step to another level every 250 ticks, too rare for the quantile that sees jumps which stay.
    const { rejectSd, passedOver, guardCost } = set(history((t) => 20 * (Math.floor(t / 250) % 2)));
    expect(rejectSd).toBeGreaterThan(100);
    expect(passedOver).toBe(0);
    expect(guardCost).toBe(0);
  });
});
