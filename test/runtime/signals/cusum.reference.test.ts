/**
 * Average run lengths of two-sided sums with k = 0.5, held against published tables by seeded simulation.
 *
 * h = 4: Lucas and Crosier, Technometrics 24 (1982), table 1, as printed in the documentation of R's package spc
 *        (xcusum.arl, examples). h = 5: Montgomery, Statistical Quality Control, table 9.3, from memory.
 */
import { expect, test } from 'vitest';
import { cusum, limitFor, runLengthOf } from '../../../runtime/signals/cusum.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seededNumbers } from '../../support/models.ts';

const RUNS = 1500;

function simulated(limit: number, shift: number): { readonly mean: number; readonly error: number } {
  const normal = gaussians(seededNumbers(4711));
  let sum = 0;
  let squares = 0;
  for (let run = 0; run < RUNS; run++) {
    let [up, down, length] = [0, 0, 0];
    while (up <= limit && down <= limit) {
      const share = shift + normal();
      up = cusum(up, share);
      down = cusum(down, -share);
      length++;
    }
    sum += length;
    squares += length * length;
  }
  const mean = sum / RUNS;
  return { mean, error: Math.sqrt((squares / RUNS - mean * mean) / RUNS) };
}

test.each([
  [4, 0, 168],
  [4, 0.25, 74.2],
  [4, 0.5, 26.6],
  [4, 1, 8.38],
  [4, 2, 3.34],
  [4, 3, 2.19],
  [5, 0, 465],
  [5, 0.5, 38.0],
  [5, 1, 10.4],
  [5, 2, 4.01],
])('at h = %d and a shift of %d the run length is %d on average', (limit, shift, published) => {
  const { mean, error } = simulated(limit, shift);
  // Four standard errors of the simulation, and half a unit of the last digit printed.
  expect(Math.abs(mean - published)).toBeLessThan(4 * error + 0.005 * published);
});

test('a table of another limit would not pass', () => {
  const { mean, error } = simulated(4.3, 0);
  expect(Math.abs(mean - 168)).toBeGreaterThan(4 * error + 0.005 * 168);
});

test('limits are found from run lengths, to two parts in a hundred of the table', () => {
  expect(Math.abs(runLengthOf(4) / 168 - 1)).toBeLessThan(0.02);
  expect(Math.abs(runLengthOf(5) / 465 - 1)).toBeLessThan(0.02);
  for (const length of [10, 465, 1e6]) expect(runLengthOf(limitFor(length))).toBeCloseTo(length, 3);
});
