/** The table of cosines against values in closed form and against the C library's. */
import { describe, expect, test } from 'vitest';
import { cosinesOf } from '../../../runtime/filter/cosine-table.ts';
import { seededNumbers } from '../../support/models.ts';

const cosine = (turns: number): number => {
  const angles = Float64Array.of(turns);
  cosinesOf(angles, 1);
  return angles[0];
};

/** The bound of the file head, and some units in the last place. */
const BOUND = 2.4e-12 + 1e-15;

describe('cosinesOf', () => {
  // Abramowitz and Stegun (1964), 4.3.46 and 4.3.48 in the limit: angles whose cosines are surds.
  test.each([
    [0, 1],
    [1 / 12, Math.sqrt(3) / 2],
    [1 / 10, (1 + Math.sqrt(5)) / 4],
    [1 / 8, Math.SQRT1_2],
    [1 / 6, 0.5],
    [1 / 5, (Math.sqrt(5) - 1) / 4],
    [1 / 4, 0],
    [1 / 3, -0.5],
    [1 / 2, -1],
    [3 / 4, 0],
    [-1 / 6, 0.5],
    [7 + 1 / 8, Math.SQRT1_2],
  ])('%d turns', (turns, value) => {
    expect(Math.abs(cosine(turns) - value)).toBeLessThan(BOUND);
  });

  test('stays within the stated error everywhere, largest half way between points', () => {
    let largest = 0;
    for (let k = 0; k < 100_000; k++) {
      const turns = k / 100_000;
      largest = Math.max(largest, Math.abs(cosine(turns) - Math.cos(2 * Math.PI * turns)));
    }
    expect(largest).toBeLessThan(BOUND);
    // The bound is near: a finer table than stated, or a longer series, would not come this close to it.
    expect(largest).toBeGreaterThan(BOUND / 3);
  });

  test('takes angles of many turns', () => {
    const random = seededNumbers(3);
    for (let k = 0; k < 1000; k++) {
      const fraction = Math.floor(random() * 2 ** 20) / 2 ** 20;
      const turns = Math.floor((random() - 0.5) * 2 ** 31);
      expect(cosine(turns + fraction)).toBe(cosine(fraction));
    }
  });
});
