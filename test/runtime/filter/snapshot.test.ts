import { createHash } from 'node:crypto';
import {
  type Bounds,
  createBounds,
  createState,
  FilterError,
  type FilterState,
  forecastPath,
  type LinearModel,
  restoreBounds,
  restoreState,
  saveBounds,
  saveState,
  trackBounds,
  update,
} from '@stillwell/runtime/filter';
import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { linearCore, seededNumbers, syntheticModel, syntheticReadings } from '../../support/models.ts';

const model = syntheticModel({ inputs: ['valve'], warmupTicks: 10, horizon: 12 });

interface Runner {
  state: FilterState;
  bounds: Bounds;
}
/** Filters on and gives a digest of everything that comes out. */
const runOn = (at: LinearModel, runner: Runner, readings: readonly Float64Array[]): string => {
  const hash = createHash('sha256');
  const median = new Float64Array(at.signalCount * at.horizon);
  for (const values of readings) {
    update(at, runner.state, runner.state.tick + 1, values);
    forecastPath(at, runner.state, median);
    trackBounds(at, runner.bounds, runner.state, median);
    for (const part of [median, runner.state.innovation, runner.bounds.radius])
      hash.update(new Uint8Array(part.buffer));
  }
  return hash.digest('hex');
};
/** Puts a run of spikes, long enough for the guard to give in, at about every tenth tick. */
const withSpikes = (readings: Float64Array[], seed: number): Float64Array[] => {
  const random = seededNumbers(seed + 1);
  let left = 0;
  for (const values of readings) {
    if (random() < 0.1) left = 1 + Math.floor(6 * random());
    if (left-- > 0) values[0] = model.clipHigh[0];
  }
  return readings;
};
const begin = (): Runner => ({ state: createState(model), bounds: createBounds(model) });

test('restoring and going on equals never having stopped, to the bit', () => {
  fc.assert(
    fc.property(
      fc.integer({ min: 0, max: 80 }),
      fc.integer(),
      fc.double({ min: 0, max: 0.9, noNaN: true }),
      (stop, seed, missing) => {
        const readings = withSpikes(syntheticReadings(model, 120, seed, missing), seed);
        const whole = begin();
        runOn(model, whole, readings.slice(0, stop));
        const restored = {
          state: restoreState(model, saveState(model, whole.state)),
          bounds: restoreBounds(model, saveBounds(model, whole.bounds)),
        };
        expect(runOn(model, restored, readings.slice(stop))).toBe(runOn(model, whole, readings.slice(stop)));
        // Equal states, equal bytes, though their rings have turned differently.
        expect(saveState(model, restored.state)).toEqual(saveState(model, whole.state));
        expect(saveBounds(model, restored.bounds)).toEqual(saveBounds(model, whole.bounds));
      },
    ),
    { seed: 20_240_611, numRuns: 60 },
  );
});

describe('a snapshot that is not right is refused', () => {
  const runner = begin();
  runOn(model, runner, syntheticReadings(model, 50, 3));
  const good = saveState(model, runner.state);
  const goodBounds = saveBounds(model, runner.bounds);
  const codeOf = (act: () => unknown): string => {
    try {
      act();
    } catch (error) {
      if (error instanceof FilterError) return error.code;
      throw error;
    }
    return 'none';
  };

  test('one bit turned, anywhere', () => {
    for (const [bytes, restore] of [
      [good, restoreState],
      [goodBounds, restoreBounds],
    ] as const) {
      for (let bit = 0; bit < 8 * bytes.length; bit += 13) {
        const bad = Uint8Array.from(bytes);
        bad[bit >> 3] ^= 1 << (bit & 7);
        expect(codeOf(() => restore(model, bad))).toBe('snapshot');
      }
      expect(codeOf(() => restore(model, bytes))).toBe('none');
    }
  });

  test('cut short, lengthened, empty, of the other kind, of another model', () => {
    for (const length of [0, 3, 24, good.length - 1]) {
      expect(codeOf(() => restoreState(model, good.subarray(0, length)))).toBe('snapshot');
    }
    const longer = new Uint8Array(good.length + 1);
    longer.set(good);
    expect(codeOf(() => restoreState(model, longer))).toBe('snapshot');
    expect(codeOf(() => restoreState(model, goodBounds))).toBe('snapshot');
    expect(codeOf(() => restoreBounds(model, good))).toBe('snapshot');
    const other = syntheticModel({ inputs: ['valve'], decays: [0.5], horizon: 12 });
    expect(codeOf(() => restoreState(other, good))).toBe('snapshot');
  });

  test('the size is what its docstring says, and small', () => {
    const { memoryCount, ringLength } = linearCore(runner.state).bank;
    expect(good.length).toBe(24 + 3 * (7 + 8 * (1 + memoryCount + ringLength)));
    expect(goodBounds.length).toBe(28 + 8 * 2 * 12 + 2 * 2 * 12 * 13);
  });
});
