/** Ticks folded in unseen: the same memories to the bit as looked at one by one, and refused where that could not be. */
import { describe, expect, test } from 'vitest';
import { forecastPath } from '../../../runtime/filter/forecast.ts';
import { createState, type Model, saveState } from '../../../runtime/filter/index.ts';
import { catchUp, foldUnseen, update } from '../../../runtime/filter/update.ts';
import { syntheticModel, syntheticReadings } from '../../support/models.ts';

const open = syntheticModel({ horizon: 6, rejectSd: 1e12 });
const readings = syntheticReadings(open, 400, 5);

function pathAfter(model: Model, ticks: number, isSeen: (t: number) => boolean) {
  const state = createState(model);
  let isBehind = false;
  let folded = 0;
  for (let t = 0; t < ticks; t++) {
    if (!isSeen(t) && foldUnseen(model, state, t, readings[t]!)) {
      isBehind = true;
      folded++;
      continue;
    }
    if (isBehind) catchUp(model, state);
    isBehind = false;
    update(model, state, t, readings[t]!);
  }
  if (isBehind) catchUp(model, state);
  const path = new Float64Array(2 * model.horizon);
  forecastPath(model, state, path);
  return { path, saved: saveState(model, state), folded };
}

describe('ticks folded in unseen', () => {
  const looked = pathAfter(open, 400, () => true);

  test.each([
    ['all but the first', (_: number) => false, 399],
    ['all but every seventh', (t: number) => t % 7 === 0, 342],
  ])('%s end in the same state and forecasts', (_, isSeen, folded) => {
    const unseen = pathAfter(open, 400, isSeen);
    expect(unseen.folded).toBe(folded);
    expect(unseen.path).toEqual(looked.path);
    expect(unseen.saved).toEqual(looked.saved);
  });

  test('are looked at all the same where a reading is missing, and after it', () => {
    const state = createState(open);
    update(open, state, 0, readings[0]!);
    const gone = Float64Array.of(Number.NaN, readings[1]![1]!);
    expect(foldUnseen(open, state, 1, gone)).toBe(false);
    expect(state.tick).toBe(0);
    update(open, state, 1, gone);
    expect(foldUnseen(open, state, 2, readings[2]!)).toBe(false);
    update(open, state, 2, readings[2]!);
    expect(foldUnseen(open, state, 3, readings[3]!)).toBe(true);
  });

  test('are looked at where a sensor hangs', () => {
    const stuck = { ticks: Int32Array.of(3, 0), rests: [new Float64Array(0), new Float64Array(0)], acts: true };
    const model = { ...open, stuck };
    const state = createState(model);
    const [still] = readings;
    update(model, state, 0, still!);
    expect(foldUnseen(model, state, 1, still!)).toBe(true);
    expect(foldUnseen(model, state, 2, still!)).toBe(false);
  });
});
