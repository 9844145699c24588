/**
 * The switched kind in the filter, on a section learned from a tank whose pump and levels are known: by a second route, with
 * missing readings, in a flood beyond anything learned, restored from a snapshot, refused where it could not be computed.
 */
import {
  createState,
  forecastPath,
  modelFromBundle,
  predictNext,
  restoreState,
  runProbe,
  type SwitchedModel,
  type SwitchedSection,
  saveState,
  update,
} from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { checkModel } from '../../../runtime/filter/check.ts';
import { PATHS } from '../../../runtime/filter/switched-paths.ts';
import { logistic } from '../../../runtime/filter/switched-table.ts';
import { TANK_HORIZON, tankBundle, tankModel } from '../../support/switched-model.ts';
import { tankHistory } from '../../support/switched-plant.ts';

const model = tankModel();
const H = TANK_HORIZON;

/** Runs a history through the filter and visits every tick. */
function run(history: readonly Float64Array[], visit: (t: number, median: Float64Array) => void, own = model): void {
  const state = createState(own);
  const median = new Float64Array(own.signalCount * H);
  for (let t = 0; t < history[0].length; t++) {
    update(
      own,
      state,
      1000 + t,
      Float64Array.from(history, (y) => y[t]),
    );
    forecastPath(own, state, median);
    visit(t, median);
  }
}

/** Root mean square of forecast less reading, and of last reading less reading, of the level at a step. */
function errors(history: readonly Float64Array[], step: number, truth = history): readonly [number, number] {
  let [ours, held, count, last] = [0, 0, 0, 0];
  run(history, (t, median) => {
    if (!Number.isNaN(history[0][t])) last = history[0][t];
    const reading = truth[0][t + step];
    if (t < 300 || reading === undefined || Number.isNaN(reading)) return;
    ours += (median[step - 1] - reading) ** 2;
    held += (last - reading) ** 2;
    count++;
  });
  return [Math.sqrt(ours / count), Math.sqrt(held / count)];
}

describe('forecasts', () => {
  const fresh = tankHistory({ seed: 31, ticks: 2000 });
  test('a third of the last value\u2019s error at 10 and 25 ticks, on a run it never saw', () => {
    for (const step of [10, 25]) {
      const [ours, held] = errors(fresh, step);
      expect(ours).toBeLessThan(held / 3);
    }
  });

  test('with three readings in ten missing, less than half', () => {
    const [ours, held] = errors(tankHistory({ seed: 31, ticks: 2000, missing: 0.3 }), 10, fresh);
    expect(ours).toBeLessThan(held / 2);
  });

  test('with the current never read, the level alone tells the mode', () => {
    const blind = [fresh[0], fresh[1].map((value, t) => (t < 50 ? value : Number.NaN))];
    const [ours, held] = errors(blind, 10, fresh);
    expect(ours).toBeLessThan(held / 1.5);
  });

  test('the near-discrete path stays between its levels and is neither all the way', () => {
    run(fresh, (t, median) => {
      if (t < 300) return;
      for (let h = 0; h < H; h++) {
        expect(median[H + h]).toBeGreaterThan(-1);
        expect(median[H + h]).toBeLessThan(9.5);
      }
    });
  });

  test('a flood beyond anything learned: the level goes up and stays within the clip', () => {
    const flooded = tankHistory({ seed: 32, ticks: 1200, floodFrom: 900, flood: 0.2 });
    run(flooded, (t, median) => {
      if (t !== 925) return;
      expect(flooded[0][t]).toBeGreaterThan(2.5);
      expect(median[9]).toBeGreaterThan(flooded[0][t]);
      expect(median[H - 1]).toBeLessThanOrEqual(model.clipHigh[0]);
    });
  });
});

describe('by a second route', () => {
  test('with no doubt, no switches and no correction a path is the sum of drifts and outlooks', () => {
    const { switched } = model;
    const plain: SwitchedSection = {
      ...switched,
      hazard: switched.hazard.map((_, k) => (k % 3 === 0 ? -50 : 0)),
      doubt: new Float64Array(switched.doubt.length),
      season: new Float64Array(switched.season.length),
      outlook: new Float64Array(switched.outlook.length),
      share: switched.share.map(() => 1),
      correction: { count: 0, readout: new Float64Array(0), basis: new Float64Array(0), limit: new Float64Array(2) },
    };
    const own: SwitchedModel = { ...model, switched: plain };
    checkModel(own);
    const history = tankHistory({ seed: 33, ticks: 400 });
    run(
      history,
      (t, median) => {
        if (t < 100 || t % 40 !== 0) return;
        const mode = history[1][t] > 4 ? 1 : 0;
        let z = (history[0][t] - own.mean[0]) / own.scale[0];
        for (let h = 0; h < H; h++) {
          z += plain.drift[mode] + plain.coupling[mode] * z;
          const clipped = Math.min(own.clipHigh[0], Math.max(own.clipLow[0], own.mean[0] + own.scale[0] * z));
          expect(median[h]).toBeCloseTo(clipped, 9);
        }
      },
      own,
    );
  });

  test('the logistic table to 3e-6', () => {
    for (let x = -25; x <= 25; x += 0.0137) expect(Math.abs(logistic(x) - 1 / (1 + Math.exp(-x)))).toBeLessThan(3e-6);
    expect(logistic(0)).toBe(0.5);
    expect(Number.isNaN(logistic(Number.NaN))).toBe(true);
  });

  test('step 1 of the path is what stands in for a missing reading', () => {
    const state = createState(model);
    const history = tankHistory({ seed: 34, ticks: 300 });
    const median = new Float64Array(2 * H);
    const next = new Float64Array(2);
    for (let t = 0; t < 300; t++) {
      update(
        model,
        state,
        t,
        Float64Array.from(history, (y) => y[t]),
      );
      forecastPath(model, state, median);
      predictNext(model, state, next);
      expect([next[0], next[1]]).toEqual([median[0], median[H]]);
    }
    expect(PATHS).toBe(16);
  });
});

describe('as the common parts need it', () => {
  test('restored at any tick it goes on to the bit', () => {
    const history = tankHistory({ seed: 35, ticks: 400, missing: 0.1 });
    const kept: { t: number; bytes: Uint8Array }[] = [];
    const state = createState(model);
    const medians: Float64Array[] = [];
    for (let t = 0; t < 400; t++) {
      update(
        model,
        state,
        t,
        Float64Array.from(history, (y) => y[t]),
      );
      medians.push(new Float64Array(2 * H));
      forecastPath(model, state, medians[t]);
      if (t % 37 === 5) kept.push({ t, bytes: saveState(model, state) });
    }
    for (const { t: from, bytes } of kept) {
      const again = restoreState(model, bytes);
      expect(saveState(model, again)).toEqual(bytes);
      const median = new Float64Array(2 * H);
      forecastPath(model, again, median);
      expect(median).toEqual(medians[from]);
      for (let t = from + 1; t < Math.min(400, from + 60); t++) {
        update(
          model,
          again,
          t,
          Float64Array.from(history, (y) => y[t]),
        );
        forecastPath(model, again, median);
        expect(median).toEqual(medians[t]);
      }
    }
  });

  test('its probe gives the same bytes twice', () => {
    expect(runProbe(model, 5, 64).outputs).toEqual(runProbe(model, 5, 64).outputs);
  });

  test('the document gives the model back', () => {
    expect(modelFromBundle(tankBundle())).toEqual(model);
  });

  test.each([
    ['a mode that grows', { coupling: Float64Array.of(0.01, 0) }, 'switched.coupling of mode 0'],
    ['a share above one', { share: model.switched.share.map(() => 1.1) }, 'switched.share'],
    ['a signal that it does not know', { forecast: Int32Array.of(0, 5) }, 'switched.forecast'],
    ['a decay of one', { decays: model.switched.decays.map(() => 1) }, 'switched.decays'],
    ['no spread', { spread: Float64Array.of(0) }, 'switched.spread'],
    ['a weight that is no number', { drift: Float64Array.of(Number.NaN, 0) }, 'switched.drift'],
    ['another length', { hazard: new Float64Array(5) }, 'switched.hazard'],
    ['a pair of modes there are not', { pairTo: Int32Array.of(7, 0) }, 'switched.pairTo'],
  ] as const)('refuses %s', (_, wrong, said) => {
    expect(() => checkModel({ ...model, switched: { ...model.switched, ...wrong } })).toThrow(said);
  });
});
