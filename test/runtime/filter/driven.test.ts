/** The driven kind against a plain second computation: its simulation, its plans, its fading, its memory. */
import { checkModel, createState, forecastPath, restoreState, saveState, update } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { syntheticDriven } from '../../support/feature-models.ts';
import { seededNumbers } from '../../support/models.ts';

const model = syntheticDriven({ horizon: 10 });
const { signalCount: ny, channelCount: nc, memberCount, hiddenCount, randomCount: D, horizon: H } = model;
const n = ny + hiddenCount;
const nu = nc - ny;

const bound = (value: number, limit: number): number => Math.max(-limit, Math.min(limit, value));
const toUnits = (c: number, z: number): number => model.mean[c] + model.scale[c] * z;

/** Next states, by the definition. */
function slowStep(x: readonly number[], u: readonly number[]): number[] {
  return x.map((_, at) => {
    const s = Math.floor(at / n);
    const known = [...x.slice(s * n, (s + 1) * n), ...u];
    const row = [...known, 1].reduce((sum, value, k) => sum + model.linear[at * (n + nu + 1) + k] * value, 0);
    let bent = 0;
    for (let j = 0; j < D; j++) {
      const f = s * D + j;
      const turns = known.reduce((sum, value, k) => sum + model.frequencies[f * (n + nu) + k] * value, model.phases[f]);
      bent += model.featureGain[at * D + j] * Math.cos(2 * Math.PI * turns);
    }
    return bound(row + bent, 10);
  });
}

const shown = (x: readonly number[], i: number): number => {
  let sum = 0;
  for (let s = 0; s < memberCount; s++) sum += bound(x[s * n + i], 2.5);
  return sum / memberCount;
};

function filtered(ticks: number, seed: number, missing = 0): ReturnType<typeof createState> {
  const random = seededNumbers(seed);
  const state = createState(model);
  for (let t = 0; t < ticks; t++) {
    const row = Float64Array.from({ length: nc }, (_, c) =>
      random() < missing ? Number.NaN : toUnits(c, 2 * random() - 1),
    );
    update(model, state, t, row);
  }
  return state;
}

/** Path by the definition, from a state, under standardised inputs of the ticks from the origin on. */
function slowPath(state: ReturnType<typeof createState>, inputs: readonly (readonly number[])[]): number[][] {
  const J = model.fadeDecays.length;
  const K = model.meanDecays.length;
  const means = (state.core as unknown as { means: Float64Array }).means;
  let x = Array.from(state.x);
  const deviation = Array.from({ length: ny }, (_, i) => {
    const now = state.value[i] - shown(x, i);
    const cues = [now, ...means.subarray(i * K, (i + 1) * K)];
    return Array.from({ length: J }, (_, j) =>
      cues.reduce((sum, cue, k) => sum + model.deviationGain[(i * J + j) * (1 + K) + k] * cue, 0),
    );
  });
  return inputs.map((u, k) => {
    x = slowStep(x, u);
    return deviation.map((fading, i) =>
      fading.reduce((sum, c, j) => sum + c * model.fadeDecays[j] ** (k + 1), shown(x, i)),
    );
  });
}

function expectPath(path: Float64Array, slow: readonly (readonly number[])[]): void {
  slow.forEach((step, k) => {
    step.forEach((z, i) => {
      const y = Math.min(model.clipHigh[i], Math.max(model.clipLow[i], toUnits(i, z)));
      expect(path[i * H + k]).toBeCloseTo(y, 7);
    });
  });
}

const pathOf = (state: ReturnType<typeof createState>, plan: Float64Array | null): Float64Array => {
  const path = new Float64Array(ny * H);
  forecastPath(model, state, path, plan);
  return path;
};

describe('a path', () => {
  test('under a plan: the simulation under it, and the deviation as it fades', () => {
    const state = filtered(40, 2, 0.1);
    const random = seededNumbers(8);
    const plan = Float64Array.from({ length: H }, () => 2 * random() - 1);
    // The input of the origin's tick acts on the step after it; the plan's last value acts beyond the horizon.
    expectPath(pathOf(state, plan), slowPath(state, [[state.value[ny]], ...Array.from(plan.slice(0, -1), (u) => [u])]));
  });

  test('holds the last planned value where the plan ends', () => {
    const state = filtered(40, 3);
    const plan = new Float64Array(H).fill(Number.NaN);
    plan.set([0.5, -1, 1.5]);
    const held = [state.value[ny], 0.5, -1, ...new Array(H - 3).fill(1.5)];
    expectPath(
      pathOf(state, plan),
      slowPath(
        state,
        held.map((u) => [u]),
      ),
    );
  });

  test('without a plan leads each input on as learned', () => {
    const state = filtered(40, 4);
    const K = model.meanDecays.length;
    const J = model.fadeDecays.length;
    const means = (state.core as unknown as { means: Float64Array }).means;
    const now = state.value[ny];
    const cues = [-now, ...Array.from(means.subarray(ny * K), (mean) => mean - now)];
    const led = Array.from({ length: H }, (_, k) => {
      let u = now;
      for (let j = 0; j < J; j++) {
        const c = cues.reduce((sum, cue, l) => sum + model.inputGain[j * (1 + K) + l] * cue, 0);
        u += c * (1 - model.fadeDecays[j] ** k);
      }
      return [u];
    });
    expectPath(pathOf(state, null), slowPath(state, led));
  });
});

test('simulates from the inputs alone: other readings of the signals, the same states', () => {
  const a = createState(model);
  const b = createState(model);
  const random = seededNumbers(5);
  for (let t = 0; t < 50; t++) {
    const u = toUnits(ny, 2 * random() - 1);
    const first = toUnits(0, 0.3);
    update(model, a, t, Float64Array.of(t === 0 ? first : toUnits(0, random()), toUnits(1, 0.1), u));
    update(model, b, t, Float64Array.of(t === 0 ? first : Number.NaN, toUnits(1, 0.1), u));
  }
  expect(a.x).toEqual(b.x);
});

test('goes on from a snapshot as if it had never stopped', () => {
  const state = filtered(60, 6, 0.2);
  const restored = restoreState(model, saveState(model, state));
  expect(pathOf(restored, null)).toEqual(pathOf(state, null));
  for (const one of [state, restored])
    update(
      model,
      one,
      60,
      Float64Array.from({ length: nc }, (_, c) => toUnits(c, 1)),
    );
  expect(saveState(model, restored)).toEqual(saveState(model, state));
});

test('stays finite and inside the clips whatever is read and planned', () => {
  const hostile = [Number.NaN, Number.POSITIVE_INFINITY, -1e308, 1e308, 0, 5e-324, 1e15, -1e15];
  const random = seededNumbers(7);
  const wild = { ...model, linear: model.linear.map((value) => 20 * value) };
  const state = createState(wild);
  const path = new Float64Array(ny * H);
  let outside = 0;
  for (let t = 0; t < 2000; t++) {
    update(
      wild,
      state,
      t,
      Float64Array.from({ length: nc }, () => hostile[Math.floor(random() * hostile.length)]),
    );
    const plan = Float64Array.from({ length: nu * H }, () => (random() < 0.5 ? Number.NaN : 1e6 * (random() - 0.5)));
    forecastPath(wild, state, path, plan);
    const isInside = path.every(
      (y, k) => y >= wild.clipLow[Math.floor(k / H)] && y <= wild.clipHigh[Math.floor(k / H)],
    );
    if (!isInside) outside++;
  }
  expect(outside).toBe(0);
});

test('refuses a decay of one, and a sensor range upside down', () => {
  expect(() => checkModel({ ...model, fadeDecays: Float64Array.of(0.5, 1) })).toThrow(/fadeDecays\[1\]/);
  expect(() => checkModel({ ...model, outputHigh: model.outputLow })).toThrow(/outputHigh\[0\]/);
});
