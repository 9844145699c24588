/** Rounding that makes good: against every weight rounded for itself. */
import { dequantise, quantiseTensor } from '@stillwell/protocol';
import { expect, test } from 'vitest';
import { planRounding, roundRows } from '../../../trainer/featured/rounding.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seededNumbers } from '../../support/models.ts';

const D = 40;
const normal = gaussians(seededNumbers(2));

/** Moments of features that are nearly combinations of eight. */
const factors = Float64Array.from({ length: D * 8 }, normal);
const gram = new Float64Array(D * D);
for (let a = 0; a < D; a++) {
  for (let b = 0; b < D; b++) {
    for (let k = 0; k < 8; k++) gram[a * D + b] += factors[a * 8 + k] * factors[b * 8 + k];
    if (a === b) gram[a * D + b] += 0.01;
  }
}

const cost = (change: Float64Array): number => {
  let sum = 0;
  for (let a = 0; a < D; a++) for (let b = 0; b < D; b++) sum += change[a] * gram[a * D + b] * change[b];
  return sum;
};

test('costs a small part of rounding each weight for itself', () => {
  const plan = planRounding(gram, D);
  let [together, alone] = [0, 0];
  for (let trial = 0; trial < 20; trial++) {
    const row = Float64Array.from({ length: D }, normal);
    const tensor = roundRows(row, 1, plan);
    expect(tensor).toMatchObject({ type: 'i8', rows: 1, cols: D });
    together += cost(dequantise(tensor).map((value, k) => value - row[k]));
    alone += cost(dequantise(quantiseTensor(row, 1, D, 'i8')).map((value, k) => value - row[k]));
  }
  // Eight of forty directions carry all but a hundredth: four fifths of the errors can be made good.
  expect(together).toBeLessThan(alone / 4);
});

test('features that have nothing to do with each other are rounded each to its nearest', () => {
  const apart = new Float64Array(D * D);
  for (let a = 0; a < D; a++) apart[a * D + a] = 1;
  const row = Float64Array.from({ length: D }, normal);
  const tensor = roundRows(row, 1, planRounding(apart, D));
  const step = new DataView(tensor.scales.buffer).getFloat32(0, true);
  const errors = dequantise(tensor).map((value, k) => Math.abs(value - row[k]));
  expect(Math.max(...errors)).toBeLessThanOrEqual(step / 2 + 1e-12);
});

test('a row of zeros stays one', () => {
  expect(dequantise(roundRows(new Float64Array(D), 1, planRounding(gram, D))).every((value) => value === 0)).toBe(true);
});
