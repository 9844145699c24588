/** Wraps told apart from resets. */
import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { counterIncrease } from '../../protocol/counter.ts';

const NONE = Number.NaN;

describe('a counter', () => {
  test.each<[string, number, number, number | null, number]>([
    ['counts', 10, 25, null, 15],
    ['stands', 10, 10, 65_536, 0],
    ['was reset, no end being known', 500, 3, null, 3],
    ['wraps at 16 bits', 65_530, 4, 65_536, 10],
    ['wraps at 32 bits', 4_294_967_290, 9, 4_294_967_296, 15],
    ['wraps at 53 bits', 9_007_199_254_740_991, 1, 9_007_199_254_740_992, 2],
    ['wraps at any number of digits', 99_999, 0, 100_000, 1],
    ['wraps from half of the range', 40_000, 7232, 65_536, 32_768],
    ['was reset: a wrap would be more than half of the range', 40_000, 7233, 65_536, 7233],
    ['was reset at a low count', 1000, 3, 65_536, 3],
    ['was set to what is neither', 60_000, 50_000, 65_536, NONE],
    ['wraps from its positive to its negative end', 32_767, -32_768, 65_536, 1],
    ['has no count before', NONE, 5, 65_536, NONE],
    ['fell below nothing', 5, -1, null, NONE],
  ])('%s', (_, before, value, wrap, increase) => expect(counterIncrease(before, value, wrap)).toBe(increase));

  test('a true count is followed through any number of wraps, whatever the steps below half of the range', () => {
    fc.assert(
      fc.property(
        fc.constantFrom(65_536, 2 ** 32, 1000, 99_999),
        fc.array(fc.double({ min: 0, max: 0.5, noNaN: true }), { maxLength: 60 }),
        (wrap, shares) => {
          let count = 0;
          let sum = 0;
          for (const share of shares) {
            const next = count + Math.floor(share * wrap);
            sum += counterIncrease(count % wrap, next % wrap, wrap);
            count = next;
          }
          expect(sum).toBe(count);
        },
      ),
      { seed: 20260411, numRuns: 300 },
    );
  });
});
