/** A plant whose cycle the model cannot time: what is said of its usual limits is put right, its alarms are left alone. */
import { expect, test } from 'vitest';
import type { Model } from '../../../runtime/filter/index.ts';
import { learnCrossing } from '../../../trainer/judge/crossing-table.ts';
import { type AskedLimit, Crossings, usualLimits } from '../../../trainer/judge/crossings.ts';
import { reliabilityOf } from '../../../trainer/judge/reliability.ts';
import { replay } from '../../../trainer/judge/replay.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seededNumbers, syntheticModel } from '../../support/models.ts';

const H = 30;
const TICKS = 9000;
const CALIBRATE = { fromTick: 3000, toTick: 6000 };
const JUDGED = { fromTick: 6000, toTick: 9000 };
const random = seededNumbers(3);

/** Fills from 1 to 2 and is emptied, at a pace drawn anew for each cycle: about twice within the horizon. */
function cycles(): Float64Array {
  let [level, pace] = [1, 0.1];
  return Float64Array.from({ length: TICKS }, () => {
    level += pace;
    if (level > 2) pace = -0.1 - 0.2 * random();
    if (level < 1) pace = 0.1 + 0.2 * random();
    return level;
  });
}

function walk(): Float64Array {
  const normal = gaussians(random);
  let level = 1.5;
  return Float64Array.from({ length: TICKS }, () => {
    level = 1.5 + 0.97 * (level - 1.5) + 0.07 * normal();
    return level;
  });
}

const seriesOf = (y: Float64Array) => ({
  tickMs: 60_000,
  firstTick: 1000,
  ticks: TICKS,
  names: ['level'],
  signalCount: 1,
  values: [y],
  digest: new Uint8Array(32),
});

/** Forecasts the last value; bounds as wide as `sdAt` says. */
function still(sdAt: (step: number) => number): Model {
  const base = syntheticModel({ signals: ['level'], horizon: H });
  return {
    ...base,
    readout: new Float64Array(base.readout.length),
    radius: Float64Array.from({ length: H }, (_, k) => 1.6448536 * sdAt(k + 1)),
    mean: Float64Array.of(1.5),
    scale: Float64Array.of(0.3),
    clipLow: Float64Array.of(-10),
    clipHigh: Float64Array.of(10),
  };
}

const ALARM: AskedLimit = { signal: 0, value: 2.9, side: 'above' };

function judged(model: Model, y: Float64Array, limits: readonly AskedLimit[]) {
  const crossings = new Crossings(model, limits, [y], JUDGED.toTick);
  replay(model, seriesOf(y), JUDGED, (moment) => {
    if (moment.at % 5 === 0) crossings.visit(moment);
  });
  return reliabilityOf(crossings.pairs, limits.length, false);
}

test('inside the cycle no worse than its own share of crossings, outside as before', () => {
  const y = cycles();
  const model = still((step) => Math.min(1.4, 0.5 * Math.sqrt(step)));
  const { crossingFresh, crossingMap, crossingMaps } = learnCrossing(model, seriesOf(y), CALIBRATE, [ALARM]);
  expect(crossingMap).toBeUndefined();
  expect(crossingMaps[0]).not.toBeNull();
  const usual = usualLimits(seriesOf(y), { fromTick: 0, toTick: CALIBRATE.fromTick });
  const before = judged({ ...model, crossingFresh }, y, usual);
  const after = judged({ ...model, crossingFresh, crossingMaps }, y, usual);
  expect(after.brier).toBeLessThan(0.5 * before.brier);
  expect(after.brier).toBeLessThan(1.1 * after.brierOfShare + 0.002);
  expect(after.meanGap).toBeLessThan(0.08);
  expect(after.meanGap).toBeLessThan(0.4 * before.meanGap);
  const alarm = [
    judged({ ...model, crossingFresh }, y, [ALARM]),
    judged({ ...model, crossingMaps, crossingFresh }, y, [ALARM]),
  ];
  expect(alarm[1]).toEqual(alarm[0]);
});

test('what is said of a plant that wanders is not made worse', () => {
  const y = walk();
  const model = still((step) => (0.07 / 0.3) * Math.sqrt((1 - 0.97 ** (2 * step)) / (1 - 0.97 ** 2)));
  const learned = learnCrossing(model, seriesOf(y), CALIBRATE, []);
  const usual = usualLimits(seriesOf(y), { fromTick: 0, toTick: CALIBRATE.fromTick });
  const before = judged({ ...model, crossingFresh: learned.crossingFresh }, y, usual);
  expect(judged({ ...model, ...learned } as Model, y, usual).brier).toBeLessThan(1.03 * before.brier);
});

test('no limit is put where no reading lies beyond', () => {
  const y = Float64Array.from({ length: 1000 }, (_, t) => (t % 10 < 5 ? 0 : 20 + (t % 7)));
  expect(usualLimits(seriesOf(y), { fromTick: 0, toTick: 1000 }).map(({ side }) => side)).not.toContain('below');
});
