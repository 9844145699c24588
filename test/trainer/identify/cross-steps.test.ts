/** Many shifts at once against one by one, to the bit, and products of changes against plain sums. */
import { describe, expect, test } from 'vitest';
import { dotShifted, dotsShifted, productsOfChanges } from '../../../trainer/identify/cross-steps.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seededNumbers } from '../../support/models.ts';

const normal = gaussians(seededNumbers(4));
const noise = (ticks: number): Float64Array => Float64Array.from({ length: ticks }, normal);

describe('shifted products', () => {
  const [a, b] = [noise(5000), noise(5000)];

  test.each([
    [40, 4443, 0, 7],
    [33, 4900, -30, 20],
    [40, 43, -5, 9],
    [40, 44, 3, 2],
  ])('from %d to %d, shifts from %d on, %d of them', (from, to, first, count) => {
    const out = new Float64Array(count);
    dotsShifted(a, b, from, to, first, out);
    expect([...out]).toEqual(Array.from(out, (_, n) => dotShifted(a, b, from, to, first + n)));
  });
});

describe('products of changes', () => {
  const changes = [noise(400), noise(400)];
  const block = { fromIndex: 3, toIndex: 371 };

  test.each([1, -1] as const)('in direction %d, none before the first reading', (direction) => {
    const out = productsOfChanges(changes, block, 8, direction);
    for (const [n, c, i] of [
      [0, 0, 1],
      [3, 1, 0],
      [7, 0, 0],
    ] as const) {
      let sum = 0;
      for (let t = block.fromIndex; t < block.toIndex; t++) {
        const u = t + direction * n;
        if (u >= 0) sum += changes[c]![t]! * changes[i]![u]!;
      }
      expect(out[(n * 2 + c) * 2 + i]).toBeCloseTo(sum, 9);
    }
  });
});
