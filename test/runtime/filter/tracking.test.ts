/** How bounds follow what came of the forecasts: errors that are alike from tick to tick, jumps of their size, gaps. */
import {
  type Bounds,
  createBounds,
  createState,
  forecastPath,
  intervalOf,
  type LinearModel,
  restoreBounds,
  saveBounds,
  trackBounds,
  update,
} from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { gaussians } from '../../support/gaussian.ts';
import { type ModelChoice, seededNumbers, syntheticModel } from '../../support/models.ts';

/** A model that forecasts persistence of one signal, in its own unit, its bounds tracked as new bundles have it. */
const persistence = (
  choice: ModelChoice,
  radius: (h: number) => number,
  longRate: number | null = 1.5,
): LinearModel => {
  const model = syntheticModel({ signals: ['level'], rejectSd: 1e6, ...choice });
  const { boundsLongRate: _, ...first } = {
    ...model,
    readout: new Float64Array(model.readout.length),
    radius: Float64Array.from({ length: model.horizon }, (__, k) => radius(k + 1)),
    clipLow: Float64Array.of(-1e6),
    clipHigh: Float64Array.of(1e6),
    mean: Float64Array.of(0),
    scale: Float64Array.of(1),
    latticeStep: Float64Array.of(1e-6),
    boundsLongRate: 0,
  };
  return longRate === null ? first : { ...first, boundsLongRate: longRate };
};

/** A slow wander with spells of larger moves: persistence errs more the further ahead, alike from tick to tick. */
const wander = (ticks: number, seed: number, size = (_: number): number => 1): Float64Array => {
  const normal = gaussians(seededNumbers(seed));
  let level = 0;
  let restless = 0;
  return Float64Array.from({ length: ticks }, (_, n) => {
    restless = 0.99 * restless + 0.14 * normal();
    level = 0.99 * level + size(n) * Math.exp(0.4 * restless) * normal();
    return level;
  });
};

interface Outcome {
  readonly inside: Float64Array;
  readonly counted: Float64Array;
  readonly bounds: Bounds;
}

/** Shares inside by step, of readings seen, of forecasts issued from tick `from` on at ages that count. */
const run = (
  model: LinearModel,
  y: Float64Array,
  from: number,
  isSeen = (_: number): boolean => true,
  counts = (age: number): boolean => age === 0,
): Outcome => {
  const H = model.horizon;
  const state = createState(model);
  const bounds = createBounds(model);
  const [median, lower, upper] = [new Float64Array(H), new Float64Array(H), new Float64Array(H)];
  const [inside, counted] = [new Float64Array(H), new Float64Array(H)];
  for (let n = 0; n < y.length; n++) {
    update(model, state, n, Float64Array.of(isSeen(n) ? y[n]! : Number.NaN));
    forecastPath(model, state, median);
    trackBounds(model, bounds, state, median);
    intervalOf(model, bounds, state, median, lower, upper);
    if (n < from || n + H >= y.length || !counts(state.age[0]!)) continue;
    for (let h = 1; h <= H; h++) {
      if (!isSeen(n + h)) continue;
      counted[h - 1]!++;
      if (y[n + h]! >= lower[h - 1]! && y[n + h]! <= upper[h - 1]!) inside[h - 1]!++;
    }
  }
  return { inside: inside.map((share, h) => share / counted[h]!), counted, bounds };
};

const worst = (shares: Float64Array): number =>
  shares.reduce((most, share) => Math.max(most, Math.abs(share - 0.9)), 0);
const mean = (shares: Float64Array): number => shares.reduce((sum, share) => sum + share, 0) / shares.length;

describe('errors alike from tick to tick', () => {
  const y = wander(9000, 4);
  const H = 48;
  // Half of what it should be: persistence of this wander errs by about the square root of the step.
  const radius = (h: number): number => 0.9 * Math.sqrt(h);

  test('coverage holds at every step, scored or not', () => {
    const { inside, bounds } = run(persistence({ horizon: H }, radius), y, 1000);
    expect(bounds.steps.length).toBeLessThan(H);
    expect(Math.abs(mean(inside) - 0.9)).toBeLessThan(0.01);
    expect(worst(inside)).toBeLessThan(0.025);
  });

  test('as in the first bundles, it falls short', () => {
    const { inside, bounds } = run(persistence({ horizon: H }, radius, null), y, 1000);
    expect(bounds.steps.length).toBe(H);
    expect(mean(inside)).toBeLessThan(0.885);
    expect(worst(inside)).toBeGreaterThan(0.04);
  });

  test('hits and misses add up to the move of the radius', () => {
    // Calibrated far too small, so that every step is of the calibrated size.
    const model = persistence({ horizon: 4 }, (h) => 0.3 * Math.sqrt(h));
    const { inside, counted, bounds } = run(model, y, 0);
    for (let h = 1; h <= 4; h++) {
      const misses = (1 - inside[h - 1]!) * counted[h - 1]!;
      const moved = bounds.radius[h - 1]! - bounds.calibrated[h - 1]!;
      const expected = (misses - 0.1 * counted[h - 1]!) * bounds.rates[h - 1]! * bounds.calibrated[h - 1]!;
      // Forecasts of the last ticks are scored but not counted: at most four.
      expect(Math.abs(moved - expected)).toBeLessThan(
        4 * 0.9 * bounds.rates[h - 1]! * bounds.calibrated[h - 1]! + 1e-9,
      );
    }
  });
});

describe('when the size of the errors changes', () => {
  const H = 24;
  const change = 4000;

  test('three times as large: coverage is back within twelve horizons', () => {
    const y = wander(12_000, 6, (n) => (n < change ? 1 : 3));
    const model = persistence({ horizon: H }, (h) => 1.8 * Math.sqrt(h));
    const at = (from: number, to: number): number => mean(run(model, y.subarray(0, to), from).inside);
    expect(at(change, change + 6 * H)).toBeLessThan(0.85);
    expect(at(change + 12 * H, 12_000)).toBeGreaterThan(0.88);
  });

  test('a tenth as large: bounds follow, and are not swung about by steps of their old size', () => {
    const y = wander(12_000, 6, (n) => (n < change ? 1 : 0.1));
    const model = persistence({ horizon: H }, (h) => 1.8 * Math.sqrt(h));
    const { inside } = run(model, y, 8000);
    expect(Math.abs(mean(inside) - 0.9)).toBeLessThan(0.02);
    const before = run(model, y.subarray(0, change), 0).bounds.radius;
    const radii = [9000, 10_000, 11_000, 12_000].map((to) => run(model, y.subarray(0, to), to).bounds.radius[H - 1]!);
    for (const radius of radii) expect(radius / before[H - 1]!).toBeLessThan(0.25);
  });

  test('calibrated a thousand times too small: caught up with', () => {
    const y = wander(6000, 7);
    const tiny = persistence({ horizon: H }, (h) => 1.8e-3 * Math.sqrt(h));
    expect(mean(run(tiny, y, 2500).inside)).toBeGreaterThan(0.87);
    expect(mean(run({ ...tiny, boundsRate: 0.001 }, y, 2500).inside)).toBeLessThan(0.5);
  });
});

test('bounds issued in gaps hold too, whatever the calibrated ones say of ages', () => {
  // Spells of twelve ticks without readings; a signal that swings between readings more than it wanders.
  const y = wander(12_000, 8).map((value, n) => value + 6 * Math.sin((2 * Math.PI * n) / 7));
  const isSeen = (n: number): boolean => n % 40 < 28;
  const model = persistence({ horizon: 12 }, () => 4);
  const { inside } = run(model, y, 4000, isSeen, (age) => age > 0);
  expect(Math.abs(mean(inside) - 0.9)).toBeLessThan(0.02);
  const still = run({ ...model, boundsLongRate: 1e-9 }, y, 4000, isSeen, (age) => age > 0);
  expect(Math.abs(mean(still.inside) - 0.9)).toBeGreaterThan(0.1);
});

describe('snapshots', () => {
  test('grow by less than the square of the horizon, and tracking goes on from them to the bit', () => {
    const bytes = (horizon: number, longRate: number | null): number => {
      const model = { ...persistence({ horizon }, () => 1, longRate) };
      return saveBounds(model, createBounds(model)).length;
    };
    // One signal, 96 steps: 2 · 96 · 97 bytes of forecasts under way and 768 of radii before.
    expect(bytes(96, null)).toBe(28 + 8 * 96 + 2 * 96 * 97);
    expect(bytes(96, 1.5)).toBeLessThan(0.5 * bytes(96, null));
    expect(bytes(288, 1.5)).toBeLessThan(0.2 * bytes(288, null));
    const model = persistence({ horizon: 40 }, (h) => Math.sqrt(h));
    const y = wander(900, 9);
    const state = createState(model);
    let bounds = createBounds(model);
    const whole = createBounds(model);
    const median = new Float64Array(40);
    for (let n = 0; n < y.length; n++) {
      update(model, state, n, Float64Array.of(n % 50 < 10 ? Number.NaN : y[n]!));
      forecastPath(model, state, median);
      trackBounds(model, bounds, state, median);
      trackBounds(model, whole, state, median);
      if (n % 97 === 0) bounds = restoreBounds(model, saveBounds(model, bounds));
    }
    expect(bounds.radius).toEqual(whole.radius);
    expect(bounds.stretch).toEqual(whole.stretch);
    expect(whole.stretch.some((factor) => factor !== 1)).toBe(true);
  });
});
