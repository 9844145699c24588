/** The driven kind on the two tanks: near the noise under a plan, where no linear simulation comes; and where it gives way. */
import { createState, type DrivenModel, forecastPath, type Model, update } from '@stillwell/runtime/filter';
import { beforeAll, describe, expect, test } from 'vitest';
import { tryDriven } from '../../../trainer/featured/driven.ts';
import { freeRun } from '../../../trainer/featured/free-run.ts';
import { fitLinearStart, NO_FEATURES } from '../../../trainer/featured/linear-start.ts';
import type { Series } from '../../../trainer/history/series.ts';
import type { Candidate } from '../../../trainer/kinds/candidate.ts';
import { attemptOf } from '../../support/attempt.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seriesOf } from '../../support/history.ts';
import { seededNumbers } from '../../support/models.ts';
import { runTanks } from '../../support/tanks.ts';

const NOISE = 0.03;
const LEARN = 1024;
const H = 40;

/** Root mean squared error of the last step under the true plan, over the ticks from LEARN on. */
function errorAtHorizon(model: Model, series: Series): number {
  const state = createState(model);
  const path = new Float64Array(H);
  const plan = new Float64Array(H);
  let sum = 0;
  let count = 0;
  const [y, u] = series.values;
  for (let t = 0; t + H < series.ticks; t++) {
    update(model, state, series.firstTick + t, Float64Array.of(y[t], u[t]));
    if (t < LEARN || t % 4 !== 0) continue;
    for (let h = 1; h <= H; h++) plan[h - 1] = (u[t + h] - model.mean[1]) / model.scale[1];
    forecastPath(model, state, path, plan);
    sum += (path[H - 1] - y[t + H]) ** 2;
    count++;
  }
  return Math.sqrt(sum / count);
}

const record = runTanks({ seed: 1, ticks: 2 * LEARN, rim: Number.POSITIVE_INFINITY, noise: NOISE });
const whole = seriesOf(['level', 'pump'], [record.level, record.pump], 1);
const learned = seriesOf(['level', 'pump'], [record.level.slice(0, LEARN), record.pump.slice(0, LEARN)], 1);

describe('two tanks without a rim', () => {
  let candidate: Candidate | null;
  beforeAll(() => {
    candidate = tryDriven(attemptOf(learned, H, 1e-3));
  });

  test('forecasts under a plan are near the noise, far below the best linear simulation', () => {
    if (candidate === null) throw new Error('expected a candidate');
    const ours = errorAtHorizon(candidate.rounded, whole);
    const model = candidate.rounded as DrivenModel;
    const standardised = whole.values.map((y, c) => y.map((value) => (value - model.mean[c]) / model.scale[c]));
    const [y, u] = standardised;
    const linear = fitLinearStart({ signals: [y], inputs: [u], from: 0, to: LEARN }, 2);
    if (linear === null) throw new Error('expected a linear simulation');
    const all = { signals: [y], inputs: [u], from: 0, to: whole.ticks };
    const [run] = freeRun(linear.shape, NO_FEATURES, linear.parameters, all);
    let square = 0;
    for (let t = LEARN; t < whole.ticks; t++) square += ((run[t] - y[t]) * model.scale[0]) ** 2 / LEARN;
    expect(ours).toBeLessThan(1.5 * NOISE);
    expect(ours).toBeLessThan(Math.sqrt(square) / 3);
  });

  test('rounding costs nothing that shows, and the section is small', () => {
    if (candidate === null) throw new Error('expected a candidate');
    const exact = errorAtHorizon(candidate.float, whole);
    expect(errorAtHorizon(candidate.rounded, whole) / exact).toBeLessThan(1.005);
    expect(candidate.sections.driven?.linear.data.length).toBeLessThan(200);
  });

  test('learned once more from all there is, it is no worse', () => {
    if (candidate === null) throw new Error('expected a candidate');
    const again = candidate.again(LEARN);
    expect(again.settled).toEqual(candidate.settled);
    expect(errorAtHorizon(again.rounded, whole)).toBeLessThan(1.3 * NOISE);
  });
});

describe('gives way', () => {
  const normal = gaussians(seededNumbers(3));
  const wander = new Float64Array(400);
  for (let t = 1; t < wander.length; t++) wander[t] = 0.9 * wander[t - 1] + normal();
  const idle = wander.map(() => normal());

  test('where there is no input', () => {
    expect(tryDriven(attemptOf(seriesOf(['level'], [wander]), 8, 1e-3))).toBeNull();
  });

  test('where the input has nothing to do with the signal', () => {
    expect(tryDriven(attemptOf(seriesOf(['level', 'pump'], [wander, idle], 1), 8, 1e-3))).toBeNull();
  });
});

test('the same record gives the same section, byte for byte', () => {
  const short = seriesOf(['level', 'pump'], [record.level.slice(0, 300), record.pump.slice(0, 300)], 1);
  const once = tryDriven(attemptOf(short, 10, 1e-3));
  expect(once).not.toBeNull();
  expect(tryDriven(attemptOf(short, 10, 1e-3))?.sections).toEqual(once?.sections);
});
