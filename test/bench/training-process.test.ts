/** What the long benches compute by themselves: a growth exponent, a median, the memory and time of a program. */
import { describe, expect, test } from 'vitest';
import { arrayHeader } from './training-files.ts';
import { FailedRun, growthExponent, measure, median } from './training-process.ts';

describe('growth', () => {
  test('is the power, whatever the unit', () => {
    const points = (power: number) => [1e5, 3e5, 1e6, 1e7].map((x) => [x, 7e-6 * x ** power] as const);
    expect(growthExponent(points(1))).toBeCloseTo(1, 10);
    expect(growthExponent(points(1.5))).toBeCloseTo(1.5, 10);
  });

  test('a fixed cost makes it less than one', () => {
    expect(growthExponent([1e5, 1e6, 1e7].map((x) => [x, 2 + 1e-6 * x] as const))).toBeLessThan(1);
  });
});

test('the median is the middle one, or halfway between the middle two', () => {
  expect([median([3, 1, 2]), median([4, 1, 3, 2]), median([5])]).toEqual([2, 2.5, 5]);
});

describe('a program', () => {
  test('is measured while it runs', async () => {
    const script = 'const held = Buffer.alloc(2e8, 1); setTimeout(() => process.stdout.write(String(held[7])), 60)';
    const ran = await measure([process.execPath, '-e', script]);
    expect(ran.stdout).toBe('1');
    expect(ran.peakMb).toBeGreaterThan(200);
    expect(ran.peakMb).toBeLessThan(600);
  });

  test('that fails says how, in one line', async () => {
    const command = [process.execPath, '-e', 'process.stderr.write("no such\\nplant"); process.exit(3)'];
    await expect(measure(command)).rejects.toThrow(/ended with 3: no such plant$/);
    await expect(measure(['/no/such/program'])).rejects.toThrow(FailedRun);
  });
});

test('the header of an array file is one block, as NumPy Enhancement Proposal 1 lays it out', () => {
  const header = arrayHeader(12);
  expect(header.length % 64).toBe(0);
  expect(header.subarray(1, 6).toString('latin1')).toBe('NUMPY');
  expect(header.readUInt16LE(8)).toBe(header.length - 10);
  expect(header.toString('latin1', 10)).toMatch(
    /^\{'descr': '<f8', 'fortran_order': False, 'shape': \(12, 8\), \} +\n$/,
  );
});
