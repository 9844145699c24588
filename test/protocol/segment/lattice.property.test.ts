import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { latticeIndex, latticeValue } from '../../../protocol/segment/index.ts';

const SEED = 20_260_102;

describe('a lattice', () => {
  it('gives decimals back exactly where one over the step is whole', () => {
    for (const digits of [0, 1, 2, 3, 4, 6])
      for (let i = -5000; i <= 5000; i += 7) {
        const value = Number((i / 10 ** digits).toFixed(digits));
        const step = 10 ** -digits;
        expect(latticeValue(latticeIndex(value, step, 0), step, 0)).toBe(value + 0);
      }
    expect(latticeValue(3, 0.1, 0)).toBe(0.3);
    expect(3 * 0.1).not.toBe(0.3);
  });

  it('gives every index back', () => {
    fc.assert(
      fc.property(
        fc.integer({ min: -(2 ** 31), max: 2 ** 31 - 1 }),
        fc.double({ min: 1e-4, max: 1e3, noNaN: true }),
        fc.double({ min: -1e3, max: 1e3, noNaN: true }),
        (k, step, offset) => {
          expect(latticeIndex(latticeValue(k, step, offset), step, offset)).toBe(k);
        },
      ),
      { seed: SEED, numRuns: 2000 },
    );
  });

  it('keeps missing as missing and knows one nought', () => {
    expect(latticeIndex(Number.NaN, 0.1, 0)).toBeNaN();
    expect(latticeValue(Number.NaN, 0.1, 0)).toBeNaN();
    expect(Object.is(latticeIndex(-0.01, 0.1, 0), 0)).toBe(true);
  });
});
