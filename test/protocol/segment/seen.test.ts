import { describe, expect, it } from 'vitest';
import { SegmentWriter } from '../../../protocol/segment/index.ts';
import { LevelTable } from '../../../protocol/segment/levels.ts';
import { SeenValues } from '../../../protocol/segment/seen.ts';
import { opening } from './opening.ts';

describe('seen values', () => {
  const seen = new SeenValues();
  for (const k of [30, 10, 20, 20, 50]) seen.add(k);

  it('own the stretch half-way to their neighbours', () => {
    expect(seen.find(20)).toBe(true);
    expect([seen.low, seen.high]).toEqual([15, 25]);
    expect(seen.find(30)).toBe(true);
    expect([seen.low, seen.high]).toEqual([25, 40]);
    expect(seen.find(10)).toBe(true);
    expect([seen.low, seen.high]).toEqual([5, 15]);
    expect(seen.find(50)).toBe(true);
    expect([seen.low, seen.high]).toEqual([40, 60]);
    expect(seen.find(25)).toBe(false);
  });

  it('part into the same two sides from above and from below', () => {
    for (let x = 5; x < 60; x++) {
      const above = seen.edge(1, x);
      const below = seen.edge(-1, 1 - x);
      if (x > 10 && x <= 50) expect(below).toBe(-above);
    }
    expect(seen.edge(1, 51)).toBeNaN();
    expect(seen.edge(-1, -9)).toBeNaN();
  });

  it('keep so many and no more', () => {
    const many = new SeenValues();
    for (let k = 0; k < 5000; k++) many.add(k);
    expect(many.find(1023)).toBe(true);
    expect(many.find(1024)).toBe(false);
  });

  it('make scaled counts cost about what the counts cost', () => {
    const cost = (scaled: (count: number) => number, scale: number): number => {
      const writer = new SegmentWriter(opening(1, { residualScaleSteps: Float64Array.of(scale) }));
      let seed = 5;
      let count = 100;
      let last = scaled(count);
      for (let t = 0; t < 3000; t++) {
        seed = (Math.imul(seed, 1_664_525) + 1_013_904_223) >>> 0;
        count += ((seed >>> 8) % 7) - 3 - Math.sign(count - 100) * (t % 2);
        writer.push(Float64Array.of(scaled(count)), Float64Array.of(last));
        last = scaled(count);
      }
      return (8 * writer.bytesSoFar) / 3000;
    };
    const counts = cost((k) => k, 2);
    const scaled = cost((k) => Math.round(k * 67.13), 134);
    // Plain indices would cost log2(67) = 6 bits more.
    expect(scaled - counts).toBeLessThan(0.6);
    expect(scaled - counts).toBeGreaterThan(-0.3);
  });
});

describe('the count table', () => {
  it('counts what followed what, and a little of all', () => {
    const table = new LevelTable();
    expect(table.prepare(0)).toBe(false);
    for (const [from, to] of [
      [0, 0],
      [0, 0],
      [0, 1],
      [1, 0],
    ] as const)
      table.learn(from, to);
    expect(table.prepare(0)).toBe(true);
    // After 0: counts 2 and 1, plus one count shared by the overall frequencies 3/4 and 1/4.
    expect(table.massOf(0)).toBeCloseTo((2 + 3 / 4) / 4, 12);
    expect(table.massOf(1)).toBeCloseTo((1 + 1 / 4) / 4, 12);
    expect(table.massOf(2)).toBe(0);
    expect(table.tail(1, 1)).toBe(table.massOf(1));
    expect(table.tail(-1, 0)).toBe(table.massOf(0));
  });

  it('gives the rarest level up for a new one', () => {
    const table = new LevelTable();
    table.learn(0, 0);
    for (let k = 0; k < 40; k++) {
      table.learn(k, 0);
      table.learn(0, k);
    }
    table.prepare(0);
    expect(table.massOf(0)).toBeGreaterThan(0.05);
    expect(table.massOf(39)).toBeGreaterThan(0);
    expect(table.massOf(20)).toBe(0);
  });
});
