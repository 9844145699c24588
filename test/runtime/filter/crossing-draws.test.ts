/**
 * Crossing by drawn paths: chances known by counting the paths, the chain alone where all paths agree, nothing but
 * probabilities whatever is read; and a signal's own map of what is said.
 */
import { CROSSING_KNOTS } from '@stillwell/protocol';
import {
  createBounds,
  createState,
  crossing,
  type FilterState,
  forecastPath,
  normalCdf,
  type SwitchedModel,
  update,
} from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import type { SwitchedKernelCore } from '../../../runtime/filter/switched.ts';
import { PATHS } from '../../../runtime/filter/switched-paths.ts';
import { TANK_HORIZON, tankModel } from '../../support/switched-model.ts';
import { tankHistory } from '../../support/switched-plant.ts';

const H = TANK_HORIZON;
const { crossingMap: _, crossingMaps: __, ...plain } = tankModel();
/** The tank's level with bounds of one width, in its own unit. */
const withSd = (sd: number, more: object = {}): SwitchedModel => ({
  ...plain,
  mean: plain.mean.map((value, c) => (c === 0 ? 0 : value)),
  scale: plain.scale.map((value, c) => (c === 0 ? 1 : value)),
  clipLow: plain.clipLow.fill(-1e3),
  clipHigh: plain.clipHigh.fill(1e3),
  radius: plain.radius.map(() => sd),
  ...more,
});

const away = (state: FilterState): Float64Array => (state.core as SwitchedKernelCore).rollout.away;

/** A flat path at zero and drawn ones given by `height(p, h)`. */
function begin(model: SwitchedModel, height: (p: number, step: number) => number) {
  const state = createState(model);
  update(model, state, 0, new Float64Array(model.channelCount));
  const median = new Float64Array(model.signalCount * H);
  forecastPath(model, state, median);
  median.fill(0);
  for (let p = 0; p < PATHS; p++) for (let h = 0; h < H; h++) away(state)[p * H + h] = height(p, h + 1);
  const bounds = createBounds(model);
  return {
    bounds,
    state,
    ask: (limit: number, side: 'above' | 'below' = 'above', as = model) =>
      crossing(as, bounds, state, median, 0, limit, side),
  };
}

test('the level is the first of the section, as these tests take it', () => {
  expect(plain.switched.forecast[0]).toBe(0);
});

describe('a cycle whose phase is not known', () => {
  // Path p stands high at step 2 p + 3 alone: 14 of 16 do so within 30 steps, the ninth at step 19.
  const peaks = (p: number, step: number): number => (step === 2 * p + 3 ? 1 : -0.1);

  test('the share of the paths that cross, and the step by which most have', () => {
    const { ask } = begin(withSd(1e-3), peaks);
    expect(ask(0.5).probability).toBeCloseTo(14 / 16, 9);
    expect(ask(0.5).step).toBe(19);
    // Half of the 14 have crossed after the eighth peak; sixteen paths do not tell of tails.
    expect(ask(0.5)).toMatchObject({ likely: 17, earliest: null, latest: null });
    expect(ask(1.5)).toEqual({ probability: 0, step: null, earliest: null, likely: null, latest: null });
    expect(ask(-0.05, 'below').probability).toBeCloseTo(1, 9);
    // The flat path in the middle crosses nothing: what would be said without the paths.
    const alone = { ...withSd(1e-3), switched: { ...plain.switched, forecast: Int32Array.of() } };
    expect(ask(0.5, 'above', alone).probability).toBe(0);
  });

  test('falls as the limit rises', () => {
    const { ask } = begin(withSd(0.2), peaks);
    const said = Array.from({ length: 80 }, (_, k) => ask(-0.5 + 0.03 * k).probability);
    for (let k = 1; k < said.length; k++) expect(said[k]).toBeLessThanOrEqual(said[k - 1]! + 1e-9);
    expect(said[0]).toBeGreaterThan(0.99);
    expect(said.at(-1)).toBeLessThan(0.01);
  });
});

test('levels that differ by path, errors anew at every step: counted path by path', () => {
  const heights = Array.from({ length: PATHS }, (_, p) => 0.1 * (p - 7.5));
  const model = withSd(0);
  const { quantile } = createBounds(model);
  const { ask } = begin({ ...model, crossingFresh: 1, radius: model.radius.map(() => quantile) }, (p) => heights[p]!);
  for (const limit of [1, 2, 2.5, 3]) {
    // One step's sd is 1 and stays with each path; of independent errors the chances of staying below multiply.
    const counted = heights.map((height) => 1 - normalCdf(limit - height) ** H);
    const mean = counted.reduce((sum, chance) => sum + chance, 0) / PATHS;
    expect(ask(limit).probability).toBeCloseTo(mean, 9);
  }
});

test('all paths alike: the chain alone', () => {
  const model = withSd(0.8, { crossingFresh: 0.5 });
  const alone = { ...model, switched: { ...model.switched, forecast: Int32Array.of() } };
  const { ask } = begin(model, () => 0);
  for (const limit of [0.2, 0.6, 1, 2]) {
    const [ours, chain] = [ask(limit), ask(limit, 'above', alone)];
    expect(ours.probability).toBeCloseTo(chain.probability, 12);
    expect(ours.step).toBe(chain.step);
  }
});

test('the kernel\u2019s paths lie about the path forecast, and one-step predictions leave them alone', () => {
  const model = tankModel();
  const history = tankHistory({ seed: 5, ticks: 400 });
  const state = createState(model);
  const median = new Float64Array(model.signalCount * H);
  const fold = (t: number) =>
    update(
      model,
      state,
      t,
      Float64Array.from(history, (y) => y[t]!),
    );
  for (let t = 0; t < 399; t++) fold(t);
  forecastPath(model, state, median);
  const before = away(state).slice();
  let widest = 0;
  for (let cell = 0; cell < H; cell++) {
    let sum = 0;
    for (let p = 0; p < PATHS; p++) sum += before[p * H + cell]!;
    expect(Math.abs(sum)).toBeLessThan(1e-9);
    widest = Math.max(widest, Math.abs(before[cell]!));
  }
  expect(widest).toBeGreaterThan(0.05);
  fold(399);
  expect(away(state)).toEqual(before);
});

test('whatever is read, a probability', () => {
  const model = tankModel();
  const state = createState(model);
  const bounds = createBounds(model);
  const median = new Float64Array(model.signalCount * H);
  const hostile = [1e308, -1e308, Number.NaN, 0, Number.POSITIVE_INFINITY, 1, Number.NEGATIVE_INFINITY, 1e-300];
  for (let t = 0; t < 600; t++) {
    const readings = Float64Array.from(
      { length: model.channelCount },
      (_, c) => hostile[(t * 3 + c * 5 + (t >> 3)) % 8]!,
    );
    update(model, state, t, readings);
    forecastPath(model, state, median);
    const limit = [1e308, -1e308, 0, 1.5, 1e-300][t % 5]!;
    const { probability, step } = crossing(model, bounds, state, median, t % model.signalCount, limit, 'above');
    expect(probability >= 0 && probability <= 1).toBe(true);
    expect(step === null || (step >= 1 && step <= H)).toBe(true);
  }
});

test('a signal\u2019s own map holds for its limits, fades beyond, and leaves other signals be', () => {
  const map = Float64Array.from(CROSSING_KNOTS, (knot) => Math.sqrt(knot));
  const model = withSd(0.8);
  const mapped = { ...model, crossingMaps: [{ low: 0.2, high: 0.6, map }, null, null] };
  const { ask } = begin(model, () => 0);
  for (const [limit, weight] of [
    [0.2, 1],
    [0.6, 1],
    [1.1, 0.5],
    [1.7, 0],
  ] as const) {
    const raw = ask(limit).probability;
    const k = CROSSING_KNOTS.findIndex((knot) => knot >= raw);
    const share = (raw - CROSSING_KNOTS[k - 1]!) / (CROSSING_KNOTS[k]! - CROSSING_KNOTS[k - 1]!);
    const put = map[k - 1]! + share * (map[k]! - map[k - 1]!);
    expect(ask(limit, 'above', mapped as SwitchedModel).probability).toBeCloseTo(raw + weight * (put - raw), 9);
  }
});
