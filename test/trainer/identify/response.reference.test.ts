/** Plans of inputs against a plant whose answer is known in closed form; source in test/bench/planned-plant.ts. */
import { describe, expect, test } from 'vitest';
import { decodeBundle } from '../../../protocol/index.ts';
import { createState, forecastPath, type Model, update } from '../../../runtime/filter/index.ts';
import { bundleFacts } from '../../../trainer/describe-bundle.ts';
import { fitSummary } from '../../../trainer/fit-summary.ts';
import { FIT_DEFAULTS, fit as fitHistory } from '../../../trainer/pipeline.ts';
import {
  DEAD_TIME,
  GAIN,
  HORIZON,
  leastError,
  plannedHistory,
  plannedSite,
  stepResponse,
} from '../../bench/planned-plant.ts';

const options = { ...FIT_DEFAULTS, kind: 'linear' as const };
const input = plannedHistory(8000, 11);
const fitted = await fitHistory(input, options);

/** What one more on the plan of the valve adds at every step, in units. */
const added = (model: Model): number[] => {
  const state = createState(model);
  for (let t = 0; t < 600; t++) {
    update(
      model,
      state,
      input.series.firstTick + t,
      Float64Array.from(input.series.values, (values) => values[t]!),
    );
  }
  const path = (value: number): Float64Array => {
    const median = new Float64Array(HORIZON);
    forecastPath(model, state, median, new Float64Array(HORIZON).fill((value - model.mean[1]!) / model.scale[1]!));
    return median;
  };
  const low = path(1);
  return Array.from(path(2), (value, k) => value - low[k]!);
};

describe('a plan of an input that matters', () => {
  test('the step response comes out of the history', () => {
    // Within 5 % of the gain: 6400 ticks of a disturbance a sixth as large as the answer.
    for (const [k, value] of added(fitted.model).entries())
      expect(Math.abs(value - stepResponse(k + 1))).toBeLessThan(0.05 * GAIN);
    expect(Math.abs(fitted.model.response!.delay[0]! - DEAD_TIME)).toBeLessThanOrEqual(1);
  });

  test('with what truly came as plan the error tends to what is left to chance; with a wrong plan it rises', () => {
    const { none, perfect, wrong } = fitted.planWorth!.trials;
    const scale = fitted.model.scale[0]! ** 2;
    // The best that knows input and disturbance; ours has to see the disturbance through noise and to learn everything.
    expect(perfect.mean[0]! * scale).toBeGreaterThan(0.8 * leastError());
    expect(perfect.mean[0]! * scale).toBeLessThan(1.2 * leastError());
    expect(perfect.mean[0]!).toBeLessThan(0.12 * none.mean[0]!);
    expect(wrong.mean[0]!).toBeGreaterThan(1.2 * none.mean[0]!);
    expect(fitSummary(fitted)).toMatch(/Under plans of valve, \d+ origins[\s\S]*outlet +\S+ +\d+ % +\d+ %/);
  });

  test('stands in the bundle and comes back out of it', () => {
    const { response } = decodeBundle(fitted.document);
    expect(response!.inputs).toEqual([0]);
    expect(response!.surprise[0]).toBeGreaterThan(0.3);
    expect(fitted.document.length).toBeLessThan(options.maxBytes);
    const { document, bundle, model } = fitted;
    const facts = bundleFacts({ document, bundle, model, digest: new Uint8Array(32) });
    expect(facts.plans).toMatchObject([{ input: 'valve', signal: 'outlet' }]);
    expect(Math.abs(facts.plans[0]!.effectPerUnit - stepResponse(HORIZON))).toBeLessThan(0.05 * GAIN);
  });

  test('a site file without a plan topic has no such section, and the same forecasts without a plan', async () => {
    const plain = await fitHistory({ ...input, site: plannedSite(null) }, options);
    expect(decodeBundle(plain.document).response).toBeUndefined();
    expect(plain.planWorth).toBeNull();
    expect(plain.hindcast.mse).toEqual(fitted.hindcast.mse);
  });
});

describe('a plan that cannot help', () => {
  test('of an input that never moved is passed over with a plain warning', async () => {
    const still = await fitHistory(
      plannedHistory(3000, 12, () => 1),
      options,
    );
    expect(still.model.response).toBeUndefined();
    expect(still.warnings.join('\n')).toMatch(/valve: never moved while learning/);
    expect(still.hindcast.mse.every(Number.isFinite)).toBe(true);
    const once = await fitHistory(
      plannedHistory(3000, 12, (t) => (t < 900 ? 1 : 2)),
      options,
    );
    expect(once.model.response).toBeUndefined();
    expect(once.warnings.join('\n')).toMatch(/valve: moved once while learning/);
  });

  test('of an input without effect is passed over with a plain warning', async () => {
    const idle = plannedHistory(4000, 13, () => 1);
    const moved = plannedHistory(4000, 14).series.values[1]!;
    const series = { ...idle.series, values: [idle.series.values[0]!, moved] };
    const found = await fitHistory({ ...idle, series }, options);
    expect(found.model.response).toBeUndefined();
    expect(found.warnings.join('\n')).toMatch(/valve: knowing it ahead does not surely improve any forecast/);
  });
});
