import { describe, expect, it } from 'vitest';
import { compareArchive } from '../../demo-fleet/archive-check.ts';

const said = [Float64Array.of(1, 10), Float64Array.of(2, Number.NaN), Float64Array.of(3, 30), Float64Array.of(4, 40)];
const archive = (a: number[], b: number[], ticks = [100, 101, 102, 103]) => ({
  ticks,
  channels: [
    { name: 'b', values: b },
    { name: 'a', values: a },
  ],
});
const compare = (a: number[], b: number[], settled = 103, ticks?: number[]) =>
  compareArchive(archive(a, b, ticks), ['a', 'b'], said, 100, settled);

describe('archive against what was said', () => {
  it('finds nothing where both agree, whatever the order of the channels', () => {
    const found = compare([1, 2, 3, 4], [10, Number.NaN, 30, 40]);
    expect(found).toEqual({ ticks: 4, readings: 7, missing: 0, different: 0, invented: 0, example: null });
  });

  it('tells a missing, a different and an invented reading apart', () => {
    const found = compare([1, Number.NaN, 3.5, 4], [10, 20, 30, 40]);
    expect(found).toMatchObject({ missing: 1, different: 1, invented: 1 });
    expect(found.example).toMatch(/^a at tick 1 of play: said 2, archived NaN$/);
  });

  it('counts a tick the archive skips, and leaves out what has not settled or come in yet', () => {
    expect(compare([1, 3, 4], [10, 30, 40], 103, [100, 102, 103])).toMatchObject({ ticks: 4, missing: 1 });
    expect(compare([1, 2, 3, 9], [10, Number.NaN, 30, 9], 102)).toMatchObject({ ticks: 3, different: 0 });
    expect(compare([1, 2], [10, Number.NaN], 103, [100, 101])).toMatchObject({ ticks: 2, missing: 0 });
    expect(compare([], [], 103, [])).toMatchObject({ ticks: 0, readings: 0 });
  });
});
