/** How long a signal repeats itself by nature: noise, slow signals, resting values, and records in which sensors hung. */
import { describe, expect, it } from 'vitest';
import { findStuck, withoutStuck } from '../../../trainer/identify/stuck.ts';
import { seriesOf } from '../../support/history.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const next = recurrence(31);
const uniform = (): number => next() / 2 ** 32;
/** A wander on a lattice: the coarser, the longer its runs. */
function wander(ticks: number, move: number, step: number): Float64Array {
  let level = 50;
  return Float64Array.from({ length: ticks }, () => {
    level = 50 + 0.95 * (level - 50) + move * (uniform() + uniform() - 1);
    return Math.round(level / step) * step;
  });
}

function longestRun(y: Float64Array): number {
  let longest = 1;
  for (let t = 1, run = 1; t < y.length; t++) {
    run = y[t] === y[t - 1] ? run + 1 : 1;
    longest = Math.max(longest, run);
  }
  return longest;
}

const guardOf = (y: Float64Array): { ticks: number; rests: number[] } => {
  const { ticks, rests } = findStuck(seriesOf(['level'], [y]), y.length);
  return { ticks: ticks[0]!, rests: Array.from(rests[0]!) };
};

describe('findStuck', () => {
  it.each([0.01, 0.3, 1])('lies above every run of twenty years of noise, lattice step %f', (step) => {
    const { ticks } = guardOf(wander(8000, 1, step));
    expect(ticks).toBeGreaterThanOrEqual(4);
    // Twenty times the history it was learned from: a fifth of a run that long is expected by nature.
    for (let k = 0; k < 20; k++) expect(longestRun(wander(8000, 1, step))).toBeLessThan(ticks + 1);
  });

  it('is not fooled by spells in which the sensor hung', () => {
    const y = wander(8000, 1, 0.01);
    const clean = guardOf(y).ticks;
    for (const at of [500, 1900, 3300, 6100]) y.fill(y[at]!, at, at + 24);
    const { ticks, rests } = guardOf(y);
    expect(rests).toEqual([]);
    expect(ticks).toBeLessThan(24);
    expect(Math.abs(ticks - clean)).toBeLessThanOrEqual(2);
  });

  it('knows the values that a signal rests at, however seldom', () => {
    const y = wander(4000, 1, 0.01);
    for (const at of [300, 1500, 2800]) y.fill(0, at, at + 60);
    const { ticks, rests } = guardOf(y);
    expect(rests).toEqual([0]);
    expect(ticks).toBeLessThan(24);
  });

  it('stays off where a signal stands still for long by nature', () => {
    const steps = Float64Array.from({ length: 5000 }, (_, t) => Math.floor(t / 50 + Math.sin(t / 50)) % 17);
    expect(guardOf(steps).ticks).toBe(0);
    expect(guardOf(new Float64Array(3000).fill(4)).ticks).toBe(0);
    expect(guardOf(Float64Array.from({ length: 3000 }, (_, t) => (Math.floor(t / 30) % 2 === 0 ? 0 : 1))).ticks).toBe(
      0,
    );
    expect(guardOf(wander(60, 1, 0.01).fill(Number.NaN, 10)).ticks).toBe(0);
  });

  it('learns from the learning part alone, and leaves inputs alone', () => {
    const y = wander(4000, 1, 0.01);
    const later = y.slice();
    later.fill(3, 3000);
    const of = (values: Float64Array): Int32Array => findStuck(seriesOf(['a', 'b'], [values, values], 1), 3000).ticks;
    expect(of(later)).toEqual(of(y));
    expect(of(y).length).toBe(1);
  });
});

describe('withoutStuck', () => {
  it('keeps the first reading of a run, and all of those at rest', () => {
    const y = Float64Array.of(1, 2, 2, 2, Number.NaN, 2, 3, 0, 0, 0, 0, 5);
    const guard = { ticks: Int32Array.of(4), rests: [Float64Array.of(0)] };
    const { values } = withoutStuck(seriesOf(['level'], [y]), guard);
    const nan = Number.NaN;
    expect(Array.from(values[0]!)).toEqual([1, 2, nan, nan, nan, nan, 3, 0, 0, 0, 0, 5]);
  });
});
