/** Which signals count as near-discrete. */
import { describe, expect, test } from 'vitest';
import { findLevels, nearestLevel } from '../../../trainer/switched/levels.ts';
import { findModes } from '../../../trainer/switched/modes.ts';
import { seededNumbers } from '../../support/models.ts';

const T = 4000;
const read = new Uint8Array(T).fill(1);

/** Stays on levels in turn, each for a while, with noise about them. */
function steps(levels: readonly number[], stay: number, noise: number, seed = 1): Float64Array {
  const random = seededNumbers(seed);
  let at = 0;
  let until = stay;
  return Float64Array.from({ length: T }, (_, t) => {
    if (t >= until) {
      at = (at + 1 + Math.floor(random() * (levels.length - 1))) % levels.length;
      until = t + stay + Math.floor(random() * stay);
    }
    return levels[at] + noise * (random() + random() - 1);
  });
}

describe('levels', () => {
  test.each([
    ['two', [0, 1]],
    ['three', [-1, 0, 2]],
    ['four', [0, 1, 2.5, 4]],
  ])('%s levels are found', (_, levels) => {
    const found = findLevels(steps(levels, 12, 0.05), read);
    expect(found).not.toBeNull();
    for (const [k, level] of levels.entries()) expect(found!.centres[k]).toBeCloseTo(level, 1);
    expect(found!.centres).toHaveLength(levels.length);
  });

  test('a rare level counts, a handful of ticks does not', () => {
    const z = steps([0, 1], 12, 0.05);
    const rare = z.slice();
    for (const from of [500, 1500, 2500, 3500]) rare.fill(3, from, from + 10);
    expect(findLevels(rare, read)!.centres).toHaveLength(3);
    const once = z.slice();
    once.fill(3, 500, 506);
    expect(findLevels(once, read)!.centres).toHaveLength(2);
  });

  test('a wander, a sine, noise and a slow swing between two values are none', () => {
    const random = seededNumbers(3);
    let x = 0;
    const wander = Float64Array.from({ length: T }, () => {
      x = 0.99 * x + random() - 0.5;
      return x;
    });
    const sine = Float64Array.from({ length: T }, (_, t) => Math.sin(t / 40));
    const noise = Float64Array.from({ length: T }, () => random());
    const swing = Float64Array.from({ length: T }, (_, t) => Math.tanh(3 * Math.sin(t / 60)));
    for (const z of [wander, sine, noise, swing]) expect(findLevels(z, read)).toBeNull();
    expect(findLevels(new Float64Array(T), read)).toBeNull();
    expect(findLevels(new Float64Array(T), new Uint8Array(T))).toBeNull();
  });

  test('missing readings do not hide them', () => {
    const random = seededNumbers(5);
    const holes = Uint8Array.from({ length: T }, () => (random() < 0.3 ? 0 : 1));
    expect(findLevels(steps([0, 1], 12, 0.05), holes)!.centres).toHaveLength(2);
  });

  test('nearest', () => {
    expect(nearestLevel(Float64Array.of(0, 1, 5), 3.1)).toBe(2);
    expect(nearestLevel(Float64Array.of(0, 1, 5), -9)).toBe(0);
  });
});

describe('joint modes', () => {
  const one = steps([0, 1], 12, 0.05);
  test('a second signal that tells the same adds none', () => {
    const same = one.map((value) => 3 * value);
    const modes = findModes([one, same], [read, read], 2, T)!;
    expect(modes.count).toBe(2);
    expect(modes.discrete).toEqual([0, 1]);
  });

  test('two that switch by themselves make four, those hardly seen are pooled', () => {
    const other = steps([0, 1], 20, 0.05, 9);
    expect(findModes([one, other], [read, read], 2, T)!.count).toBe(4);
    const seldom = other.map((value, t) => (one[t] > 0.5 && t % 400 > 2 ? Math.min(value, 0.05) : value));
    const pooled = findModes([one, seldom], [read, read], 2, T);
    expect(pooled?.count ?? 2).toBeLessThan(4);
  });

  test('unknown where one of them is missing', () => {
    const hole = read.slice();
    hole.fill(0, 10, 20);
    const modes = findModes([one, one], [read, hole], 2, T)!;
    expect(Array.from(modes.of.subarray(10, 20)).every((mode) => mode === -1)).toBe(true);
    expect(modes.of[30]).toBeGreaterThanOrEqual(0);
  });
});
