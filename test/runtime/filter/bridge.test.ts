/** Readings that come back: memories stand as if the missed values had been what the bridge says, by feeding just those. */
import { createState, type LinearModel, predictNext, restoreState, saveState, update } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { linearCore, syntheticModel, syntheticReadings } from '../../support/models.ts';

const plain = syntheticModel({ horizon: 12, rejectSd: 1e9, inputs: ['command'], lags: [1, 2, 5] });
const models: readonly (readonly [string, LinearModel])[] = [
  ['a bank with lags', { ...plain, bridgesGaps: true }],
  ['a round', { ...plain, bridgesGaps: true, round: { ticks: 20, weight: Float64Array.of(1, 0.5) } }],
];

/** Readings of three channels; signal 0 is missing from `from` on, `missed` ticks long. */
function gapped(from: number, missed: number): Float64Array[] {
  return syntheticReadings(plain, 90, 12).map((row, n) =>
    n >= from && n < from + missed ? Float64Array.of(Number.NaN, row[1]!, row[2]!) : row,
  );
}

describe.each(models)('%s', (_, model) => {
  test.each([1, 2, 3, 6, 12])('after %d missed ticks', (missed) => {
    const from = 70;
    const back = from + missed;
    const readings = gapped(from, missed);
    const state = createState(model);
    const stoodIn: number[] = [];
    for (let n = 0; n <= back; n++) {
      update(model, state, n, readings[n]!);
      if (n >= from && n < back) stoodIn.push(state.value[0]!);
    }
    const off = state.innovation[0]!;
    // The other way: what the bridge says of each missed tick is read in its place.
    const fed = createState(model);
    for (let n = 0; n <= back; n++) {
      const k = n - from;
      const z = k >= 0 && k < missed ? stoodIn[k]! + (off * (k + 1)) / (missed + 1) : Number.NaN;
      const row = Number.isNaN(z)
        ? readings[n]!
        : Float64Array.of(model.mean[0]! + model.scale[0]! * z, readings[n]![1]!, readings[n]![2]!);
      update(model, fed, n, row);
    }
    const { memory, ring } = linearCore(state);
    const other = linearCore(fed);
    for (let m = 0; m < memory.length; m++) expect(memory[m]).toBeCloseTo(other.memory[m]!, 9);
    for (let m = 0; m < ring.length; m++) expect(ring[m]).toBeCloseTo(other.ring[m]!, 9);
    state.roundMemory.forEach((value, m) => {
      if (!Number.isNaN(value)) expect(value).toBeCloseTo(fed.roundMemory[m]!, 9);
    });
    const [a, b] = [new Float64Array(3), new Float64Array(3)];
    predictNext(model, state, a);
    predictNext(model, fed, b);
    for (let c = 0; c < 3; c++) expect(a[c]).toBeCloseTo(b[c]!, 9);
    // Without the bridge they differ: the check can fail.
    const unbridged = createState({ ...model, bridgesGaps: false });
    for (let n = 0; n <= back; n++) update({ ...model, bridgesGaps: false }, unbridged, n, readings[n]!);
    expect(Math.abs(linearCore(unbridged).memory[0]! - other.memory[0]!)).toBeGreaterThan(1e-6);
  });

  test('a snapshot inside the gap goes on to the same bits', () => {
    const readings = gapped(70, 5);
    const state = createState(model);
    for (let n = 0; n < 73; n++) update(model, state, n, readings[n]!);
    const again = restoreState(model, saveState(model, state));
    for (let n = 73; n < 80; n++) for (const one of [state, again]) update(model, one, n, readings[n]!);
    expect(saveState(model, again)).toEqual(saveState(model, state));
  });
});

test('a gap longer than the fade is not bridged', () => {
  const model = models[0]![1];
  const readings = gapped(40, 13);
  const bridged = createState(model);
  const not = createState({ ...model, bridgesGaps: false });
  for (let n = 0; n < 60; n++) {
    update(model, bridged, n, readings[n]!);
    update({ ...model, bridgesGaps: false }, not, n, readings[n]!);
  }
  expect(linearCore(bridged).memory).toEqual(linearCore(not).memory);
});
