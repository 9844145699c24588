/** Wild readings: what jumps away and back as nowhere else is left out, what the plant does by itself is not. */
import { describe, expect, it } from 'vitest';
import { findExcursions, withoutExcursions } from '../../../trainer/identify/excursions.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seriesOf } from '../../support/history.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const ends = { learnTicks: 1200, calibrateEnd: 1600 };
const next = recurrence(5);
const normal = gaussians(() => next() / 2 ** 32);
let level = 0;
const quiet = Float64Array.from({ length: 2000 }, () => {
  level = 0.99 * level + 0.1 * normal();
  return Math.round(1000 * (10 + level)) / 1000;
});

const changed = (change: (value: number, t: number) => number): Float64Array => quiet.map(change);
const found = (y: Float64Array, reach = 24) =>
  findExcursions(seriesOf(['y'], [y]), [0.001], reach, ends).map(({ fromIndex, toIndex }) => [fromIndex, toIndex]);

describe('findExcursions', () => {
  it('finds a spell that jumps away, wanders there and jumps back, in each part', () => {
    const away = changed((value, t) =>
      (t >= 300 && t < 330) || (t >= 1400 && t < 1410) ? value + 6 + 2 * (t % 3) : value,
    );
    expect(found(away)).toEqual([
      [300, 330],
      [1400, 1410],
    ]);
  });

  it('finds single spikes however many there are', () => {
    const spiky = changed((value, t) => (t % 97 === 50 && t < 1000 && t > 400 ? value - 9 : value));
    expect(found(spiky)).toEqual([438, 535, 632, 729, 826, 923].map((t) => [t, t + 1]));
  });

  it('leaves a quiet signal, a step that stays and a gap alone', () => {
    expect(found(quiet)).toEqual([]);
    expect(found(changed((value, t) => (t >= 700 ? value + 8 : value)))).toEqual([]);
    expect(found(changed((value, t) => (t >= 500 && t < 560 ? Number.NaN : value)))).toEqual([]);
  });

  it('leaves alone what the plant does again and again', () => {
    // A pump that runs a quarter of the time, and one that runs for ten ticks three times in the learning part.
    expect(found(changed((value, t) => (t % 40 < 10 ? value + 8 : value)))).toEqual([]);
    expect(found(changed((value, t) => (t % 400 >= 100 && t % 400 < 110 ? value + 8 : value)))).toEqual([]);
  });

  it('does not take a twentieth of a part for wild', () => {
    expect(
      found(
        changed((value, t) => (t >= 300 && t < 365 ? value + 8 : value)),
        80,
      ),
    ).toEqual([]);
  });

  it('never joins jumps on either side of the end of a part', () => {
    expect(found(changed((value, t) => (t >= 1195 && t < 1205 ? value + 8 : value)))).toEqual([]);
  });

  it('makes those readings missing and touches no other', () => {
    const series = seriesOf(['y', 'z'], [quiet, quiet]);
    const calm = withoutExcursions(series, [{ channel: 1, fromIndex: 5, toIndex: 8 }]);
    expect(Array.from(calm.values[1]!.subarray(4, 9), Number.isNaN)).toEqual([false, true, true, true, false]);
    expect(calm.values[0]).toBe(series.values[0]);
    expect(series.values[1]![6]).toBe(quiet[6]);
    expect(withoutExcursions(series, [])).toBe(series);
  });
});
