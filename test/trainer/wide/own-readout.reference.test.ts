/** Regression on a few states and each number's own newest value, against the least squares of ml-matrix 6 (npm). */
import { Matrix, solve } from 'ml-matrix';
import { expect, test } from 'vitest';
import { OwnReadout } from '../../../trainer/wide/own-readout.ts';
import { openRandom } from '../../../trainer/wide/random.ts';

const [STATES, OUTPUTS, STEPS, ROWS] = [3, 2, 4, 60];

function rows(seed: number): { x: number[]; newest: number[]; future: number[] }[] {
  const random = openRandom(seed);
  const draw = (count: number): number[] => Array.from({ length: count }, () => random.normal());
  return Array.from({ length: ROWS }, () => {
    const x = draw(STATES);
    const newest = draw(OUTPUTS).map((value, j) => value + 0.7 * x[j]);
    return { x, newest, future: draw(OUTPUTS * STEPS).map((value, c) => value + newest[c % OUTPUTS] * (c / 8) - x[0]) };
  });
}

test('is the least-squares regression on states and newest value, number by number', () => {
  const all = rows(4);
  const readout = new OwnReadout(STATES, OUTPUTS, STEPS);
  for (const { x, newest, future } of all) readout.add(x, newest, future);
  const { forecastMap, own } = readout.solve();
  for (let c = 0; c < OUTPUTS * STEPS; c++) {
    const design = new Matrix(all.map(({ x, newest }) => [...x, newest[c % OUTPUTS]]));
    const expected = solve(design, Matrix.columnVector(all.map(({ future }) => future[c])), true).to1DArray();
    // Our ridge is 1e-9 of the mean energy.
    for (let k = 0; k < STATES; k++) expect(forecastMap[c * STATES + k]).toBeCloseTo(expected[k], 7);
    expect(own[c]).toBeCloseTo(expected[STATES], 7);
  }
});

test('fewer states are those regressed alone, and errors are those of the rows', () => {
  const all = rows(5);
  const readout = new OwnReadout(STATES, OUTPUTS, STEPS);
  const fewer = new OwnReadout(2, OUTPUTS, STEPS);
  for (const { x, newest, future } of all) {
    readout.add(x, newest, future);
    fewer.add(x.slice(0, 2), newest, future);
  }
  for (const order of [0, 2]) {
    const { forecastMap, own } = readout.solve(order);
    if (order === 2) expect(forecastMap).toEqual(fewer.solve().forecastMap);
    let sum = 0;
    for (const { x, newest, future } of all) {
      future.forEach((value, c) => {
        let told = own[c] * newest[c % OUTPUTS];
        for (let k = 0; k < order; k++) told += forecastMap[c * order + k] * x[k];
        sum += (value - told) ** 2;
      });
    }
    expect(readout.errorOf({ forecastMap, own }, order) / sum).toBeCloseTo(1, 9);
  }
  const energy = all.reduce((sum, { future }) => sum + future.reduce((part, value) => part + value * value, 0), 0);
  expect(readout.energy / energy).toBeCloseTo(1, 12);
});

test('a newest value that the states tell already, or that never moves, adds nothing', () => {
  const readout = new OwnReadout(1, 2, 1);
  for (let t = 1; t < 20; t++) readout.add([t], [2 * t, 0], [3 * t, t]);
  const { forecastMap, own } = readout.solve();
  expect([...own]).toEqual([0, 0]);
  expect(forecastMap[0]).toBeCloseTo(3, 6);
  expect(forecastMap[1]).toBeCloseTo(1, 6);
});
