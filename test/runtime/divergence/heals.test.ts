/**
 * Plants that change under a filter, up to the filter's own reach: within N ticks nine in ten readings lie inside the bounds
 * of the step before again, less what chance allows, and no number is ever anything but finite.
 */
import { modelFromBundle } from '@stillwell/runtime/filter';
import { expect, test } from 'vitest';
import { CALM_TICKS, FIRST_RETRY_TICKS, Ladder, LONG, REST_TICKS } from '../../../runtime/divergence/ladder.ts';
import { warmed } from '../../../runtime/divergence/warmed.ts';
import { RecentTicks } from '../../../runtime/ingest/recent.ts';
import { Serving } from '../../../runtime/serving.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seededNumbers, syntheticBundle } from '../../support/models.ts';

/** Ticks after which the bounds must hold again, for every change tried here. */
const N = 128;
/** Ticks over which they are looked at. */
const WINDOW = 200;
/** 0.9 less three standard deviations of a share of two hundred, and what neighbours that are alike add. */
const LEAST_INSIDE = 0.8;
const CHANGE = 600;

const bundle = syntheticBundle({ signals: ['level', 'flow'], warmupTicks: 50 });
const model = modelFromBundle(bundle);
const checked = { bundle, model, digest: new Uint8Array(32), epoch: 1, sequence: 1 };

/** Slow swings about each signal's mean, with noise; what stands in for a plant. */
function readingsOf(ticks: number): Float64Array[] {
  const normal = gaussians(seededNumbers(21));
  let wander = 0;
  return Array.from({ length: ticks }, (_, n) => {
    wander = 0.98 * wander + 0.05 * normal();
    return Float64Array.from({ length: 2 }, (_, c) => {
      const swing = 0.5 * Math.sin((2 * Math.PI * n) / 24 + c) + wander + 0.1 * normal();
      return model.mean[c]! + model.scale[c]! * swing;
    });
  });
}

type Change = (values: Float64Array, n: number) => void;

const CHANGES: readonly [string, Change][] = [
  ['a level shift of three spreads', (values) => values.set([values[0]! + 3 * model.scale[0]!])],
  ['two sensors swapped', (values) => void values.reverse()],
  ['a scale of a thousand', (values) => values.set([1000 * values[0]!])],
  ['a day without a reading', (values, n) => void (n < CHANGE + 24 * 60 && values.fill(Number.NaN))],
];

test.each(CHANGES)(`after %s bounds hold again within ${N} ticks`, (name, change) => {
  const back = name.startsWith('a day') ? CHANGE + 24 * 60 : CHANGE;
  const ticks = readingsOf(back + N + WINDOW);
  const ladder = new Ladder();
  const recent = new RecentTicks(2, 8192);
  let serving = new Serving(checked);
  const inside = [0, 0];
  for (let n = 0; n < ticks.length; n++) {
    if (n >= CHANGE) change(ticks[n]!, n);
    serving.computeBounds();
    for (let c = 0; c < 2 && n >= back + N; c++) {
      const reading = Math.min(model.clipHigh[c]!, Math.max(model.clipLow[c]!, ticks[n]![c]!));
      const at = c * model.horizon;
      if (reading >= serving.lower[at]! - 1e-9 && reading <= serving.upper[at]! + 1e-9) inside[c]!++;
    }
    recent.push(n, ticks[n]!);
    serving.step(n, ticks[n]!);
    expect(serving.isSound).toBe(true);
    const action = ladder.observe(serving);
    if (action !== null) serving = warmed(checked, recent, n + 1);
  }
  for (const count of inside) expect(count / WINDOW).toBeGreaterThan(LEAST_INSIDE);
});

/** A serving filter whose errors are what a test says they are, in widths of the guard. */
function shown(ladder: Ladder, serving: Serving, tick: number, widths: number): ReturnType<Ladder['observe']> {
  const { state } = serving;
  state.tick = tick;
  state.observed.fill(1);
  for (let i = 0; i < 2; i++) state.innovation[i] = widths * model.rejectSd * model.residualScale[i]!;
  return ladder.observe(serving);
}

test('the ladder is climbed step by step, each with time to heal, and ends in holding', () => {
  const ladder = new Ladder();
  const serving = new Serving(checked);
  const steps: [number, string][] = [];
  let last = '';
  for (let tick = 0; tick < 400; tick++) {
    shown(ladder, serving, tick, 2);
    const step = ladder.present?.step ?? '';
    if (step !== last) steps.push([tick, step]);
    last = step;
    if (step === 'widened') expect(serving.least[0]).toBeGreaterThan(0);
    if (step === 'holding') break;
  }
  expect(steps.map(([, step]) => step)).toEqual(['passing-over', 'widened', 'reset', 'previous-bundle', 'holding']);
  expect(steps.at(-1)![0]).toBeLessThanOrEqual(LONG + 2 * REST_TICKS);
  expect(ladder.isRetryDue(steps.at(-1)![0] + FIRST_RETRY_TICKS - 1)).toBe(false);
  expect(ladder.isRetryDue(steps.at(-1)![0] + FIRST_RETRY_TICKS)).toBe(true);
});

test('steps are forgotten after a long calm, not after a short one', () => {
  const ladder = new Ladder();
  const serving = new Serving(checked);
  let tick = 0;
  while (shown(ladder, serving, tick, 2) === null) tick++;
  for (let k = 1; k < CALM_TICKS; k++) expect(shown(ladder, serving, tick + k, 0)).toBeNull();
  expect(ladder.present!.step).toBe('reset');
  shown(ladder, serving, tick + CALM_TICKS, 0);
  expect(ladder.present).toBeNull();
  expect(serving.least[0]).toBe(0);
});

test('single spikes, however large, move nothing', () => {
  const ladder = new Ladder();
  const serving = new Serving(checked);
  for (let tick = 0; tick < 2000; tick++) {
    expect(shown(ladder, serving, tick, tick % 3 === 0 ? 1000 : 0)).toBeNull();
    expect(ladder.present).toBeNull();
  }
});
