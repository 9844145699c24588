/** Scores of replays: by a slow second route, and deaf to excluded time. */
import { createState, forecastPath, update } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { standingAt } from '../../../trainer/judge/replay.ts';
import { replayMse, signalErrors } from '../../../trainer/judge/replay-scores.ts';
import { seriesOf } from '../../support/history.ts';
import { syntheticModel, syntheticReadings } from '../../support/models.ts';

const model = syntheticModel({ horizon: 6, rejectSd: 1e9 });
const H = model.horizon;
const readings = syntheticReadings(model, 600, 3, 0.1);
const values = [0, 1].map((c) => Float64Array.from(readings, (row) => row[c]!));
const series = seriesOf(['level', 'flow'], values);
const span = { fromTick: 400, toTick: 600 };

/** Mean squared error of signal 0 at one step, origins from 399 on, every `every`th; excluded ticks left out. */
function slowly(step: number, every: number, isExcluded: (t: number) => boolean): number {
  const state = createState(model);
  const path = new Float64Array(2 * H);
  let sum = 0;
  let count = 0;
  for (let t = 0; t < 600 - H; t++) {
    update(model, state, series.firstTick + t, readings[t]!);
    if (t < 399 || (t - 399) % every !== 0 || isExcluded(t) || isExcluded(t + step)) continue;
    const reading = values[0]![t + step]!;
    if (Number.isNaN(reading)) continue;
    forecastPath(model, state, path);
    sum += ((path[step - 1]! - reading) / model.scale[0]!) ** 2;
    count++;
  }
  return sum / count;
}

describe('replayed scores', () => {
  test.each([1, 7])('agree with a plain loop, every %d origins', (every) => {
    const mse = replayMse(model, series, span, { every });
    for (const step of [1, 3, H])
      expect(mse[step - 1]).toBeCloseTo(
        slowly(step, every, () => false),
        9,
      );
  });

  test('leave out origins and targets in excluded time', () => {
    const isExcluded = Uint8Array.from({ length: 600 }, (_, t) => (t >= 450 && t < 500 ? 1 : 0));
    const excluded = { ...series, excluded: { isExcluded, entries: [] } };
    const mse = replayMse(model, excluded, span);
    for (const step of [1, H])
      expect(mse[step - 1]).toBeCloseTo(
        slowly(step, 1, (t) => isExcluded[t] === 1),
        9,
      );
    expect(signalErrors(model, excluded, span)[0]).not.toBe(signalErrors(model, series, span)[0]);
  });

  test('are the same to the bit from a filter that stands warmed up, however often it is started from', () => {
    const standing = standingAt(model, series, { ...span, fromTick: span.fromTick - 1 }, 380);
    const whole = replayMse(model, series, span);
    for (const _ of ['once', 'again']) expect(replayMse(model, series, span, { standing })).toEqual(whole);
    expect(standing.state.tick).toBe(series.firstTick + 379);
  });
});
