/** One warmed-up filter for all replays of calibration: the same to the bit as warming up each. */
import { describe, expect, test } from 'vitest';
import { calibrate } from '../../../trainer/judge/calibrate.ts';
import { standingAt } from '../../../trainer/judge/replay.ts';
import { settle } from '../../../trainer/judge/settle.ts';
import { settleStuck } from '../../../trainer/judge/stuck-guard.ts';
import { seriesOf } from '../../support/history.ts';
import { syntheticModel, syntheticReadings } from '../../support/models.ts';

const { stuck: _, ...model } = syntheticModel({ horizon: 6, rejectSd: 1e9 });
const readings = syntheticReadings(model, 900, 3, 0.02);
const values = [0, 1].map((c) => Float64Array.from(readings, (row) => row[c]!));
const series = seriesOf(['level', 'flow'], values);
// The warm-up of every replay reaches back to the first reading.
const span = { fromTick: 300, toTick: 900 };
const standing = standingAt(model, series, span, span.fromTick - 1);
const limits = [{ signal: 0, value: 11, side: 'above' }] as const;
const found = { ticks: Int32Array.of(9, 9), rests: [new Float64Array(0), new Float64Array(0)] };

describe('replays from one warmed-up filter', () => {
  test('calibrate alike', () => {
    expect(calibrate(model, series, span, 0.9, limits, standing)).toEqual(calibrate(model, series, span, 0.9, limits));
  });

  test('judge the guard against hanging sensors alike, which the warmed-up filter did not have', () => {
    expect(settleStuck(model, series, span, found, standing)).toEqual(settleStuck(model, series, span, found));
  });

  test('of a short part are replayed each for itself', () => {
    const wanted = { coverage: 0.9, limits, stuck: found };
    const calibration = calibrate(model, series, span, 0.9, limits);
    const stuck = settleStuck({ ...model, ...calibration }, series, span, found);
    expect(settle(model, series, span, wanted)).toEqual({ ...calibration, stuck });
  });
});
