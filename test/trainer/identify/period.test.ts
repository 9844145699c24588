/** Periods: planted ones are found, each once; noise has none. */
import { describe, expect, it } from 'vitest';
import { findPeriods } from '../../../trainer/identify/period.ts';
import { gaussians } from '../../support/gaussian.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const HOUR_MS = 3_600_000;
const SECOND_MS = 1000;

/** Red noise and cycles; each [period, size] with a second harmonic of half the size. */
function signal(ticks: number, cycles: readonly (readonly [number, number])[], seed = 5): Float64Array {
  const next = recurrence(seed);
  const normal = gaussians(() => next() / 2 ** 32);
  let red = 0;
  return Float64Array.from({ length: ticks }, (_, t) => {
    red = 0.9 * red + normal();
    const turns = cycles.map(([period, size]) => {
      const angle = (2 * Math.PI * t) / period;
      return size * (Math.sin(angle) + 0.5 * Math.sin(2 * angle + 1));
    });
    return red + turns.reduce((sum, value) => sum + value, 0);
  });
}

describe('findPeriods', () => {
  it('takes the day for granted, and finds what cycles beside it, not the harmonics of the day', () => {
    const values = [
      signal(4000, [
        [24, 3],
        [17.3, 2],
      ]),
    ];
    expect(findPeriods(values, HOUR_MS)).toEqual({ main: 24, others: [17.3] });
  });

  it('finds periods where no day is within reach, those of all signals before those of one', () => {
    const cycles = [
      [41, 2.5],
      [190, 3],
    ] as const;
    const values = [signal(8000, cycles), signal(8000, cycles.slice(0, 1), 6)];
    expect(findPeriods(values, SECOND_MS)).toEqual({ main: 41, others: [190] });
  });

  it('finds none in red noise', () => {
    for (const seed of [1, 2, 3, 4, 5, 6]) {
      expect(findPeriods([signal(8000, [], seed)], SECOND_MS)).toEqual({ main: 0, others: [] });
    }
  });
});
