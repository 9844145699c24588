/** Products on the features that take part against products on all of them, to the bit. */
import { describe, expect, test } from 'vitest';
import { pickedRows, pickedSquare, usedRows } from '../../../trainer/identify/used-rows.ts';
import { multiply } from '../../../trainer/linalg/products.ts';
import { seededNumbers } from '../../support/models.ts';

const random = seededNumbers(8);
const numbers = (count: number): Float64Array => Float64Array.from({ length: count }, () => random() - 0.5);
const [p, width] = [11, 6];
const features = numbers(p * p);
const map = numbers(p * width);
for (const row of [0, 4, 9]) map.fill(0, row * width, (row + 1) * width);
map.fill(0, 5 * width, 5 * width + 3);

describe('rows that are used', () => {
  const used = usedRows(map, p, width, 0, width);

  test('are those that hold anything in the columns asked for', () => {
    expect([...used]).toEqual([1, 2, 3, 5, 6, 7, 8, 10]);
    expect([...usedRows(map, p, width, 0, 3)]).toEqual([1, 2, 3, 6, 7, 8, 10]);
  });

  test('give the product that all rows give', () => {
    const n = used.length;
    const some = multiply(pickedSquare(features, p, used), pickedRows(map, width, used, 0, width), n, n, width);
    expect(some).toEqual(pickedRows(multiply(features, map, p, p, width), width, used, 0, width));
  });
});
