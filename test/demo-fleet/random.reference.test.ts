/**
 * The demo's random numbers against published tables of the distributions they should follow.
 *
 * Critical values: chi-squared, 9 degrees of freedom, upper 0.01: 21.666, and 99 degrees, upper 0.01: 134.642 (NIST/SEMATECH
 * e-Handbook of Statistical Methods, section 1.3.6.7.4); Kolmogorov-Smirnov at 0.01 for large n: 1.63/√n (Massey 1951,
 * table 1); standard normal: 0.8413 below 1, 0.9772 below 2 (Abramowitz and Stegun, table 26.1). From memory.
 * The seeds are fixed, so a test passes always or never; other seeds would fail about once in a hundred.
 */
import { describe, expect, test } from 'vitest';
import { openRandom } from '../../demo-fleet/random.ts';

const N = 100_000;

/** Pearson's statistic of counts that should be equal. */
function chiSquared(counts: readonly number[]): number {
  const expected = counts.reduce((sum, count) => sum + count, 0) / counts.length;
  return counts.reduce((sum, count) => sum + (count - expected) ** 2 / expected, 0);
}

/** Largest distance between the sample's distribution and the given one. */
function distance(sample: readonly number[], below: (value: number) => number): number {
  const sorted = [...sample].sort((a, b) => a - b);
  return Math.max(
    ...sorted.map((value, i) => Math.max(below(value) - i / sorted.length, (i + 1) / sorted.length - below(value))),
  );
}

describe('uniform numbers', () => {
  test('fill ten bins evenly, and a hundred bins of neighbouring pairs', () => {
    const random = openRandom(1, 'bins');
    const single = new Array<number>(10).fill(0);
    const pairs = new Array<number>(100).fill(0);
    for (let i = 0; i < N; i++) {
      const [a, b] = [Math.floor(random.uniform() * 10), Math.floor(random.uniform() * 10)];
      single[a]!++;
      pairs[10 * a + b]!++;
    }
    expect(chiSquared(single)).toBeLessThan(21.666);
    expect(chiSquared(pairs)).toBeLessThan(134.642);
  });

  test('a planted bias of two in a hundred is seen', () => {
    const random = openRandom(1, 'bins');
    const single = new Array<number>(10).fill(0);
    for (let i = 0; i < N; i++) single[Math.floor(random.uniform() ** 1.02 * 10)]!++;
    expect(chiSquared(single)).toBeGreaterThan(21.666);
  });

  test('streams of other names and seeds are others, and the same one comes back', () => {
    const draw = (seed: number, name: string): number[] => {
      const random = openRandom(seed, name);
      return Array.from({ length: 4 }, () => random.uniform());
    };
    expect(draw(1, 'pump')).toEqual(draw(1, 'pump'));
    expect(draw(1, 'pump')).not.toEqual(draw(2, 'pump'));
    expect(draw(1, 'pump')).not.toEqual(draw(1, 'door'));
  });
});

describe('shaped numbers', () => {
  test('normal ones keep to the table', () => {
    const random = openRandom(3, 'normal');
    const sample = Array.from({ length: N }, () => random.normal());
    const below = (limit: number): number => sample.filter((value) => value < limit).length / N;
    // Four standard errors of a share of 100,000.
    expect(Math.abs(below(1) - 0.8413)).toBeLessThan(0.0047);
    expect(Math.abs(below(2) - 0.9772)).toBeLessThan(0.0019);
    expect(Math.abs(below(-1) - (1 - 0.8413))).toBeLessThan(0.0047);
  });

  test('exponential ones keep to 1 - exp(-x/mean)', () => {
    const random = openRandom(4, 'exponential');
    const sample = Array.from({ length: 20_000 }, () => random.exponential(7));
    expect(distance(sample, (value) => 1 - Math.exp(-value / 7))).toBeLessThan(1.63 / Math.sqrt(sample.length));
    expect(distance(sample, (value) => 1 - Math.exp(-value / 7.2))).toBeGreaterThan(1.63 / Math.sqrt(sample.length));
  });
});
