/** The header's table: the same beside the code and in the README, and true of real bytes. */
import { readFileSync } from 'node:fs';
import { describe, expect, it } from 'vitest';
import { stateCheck } from '../../../protocol/segment/header.ts';
import * as segment from '../../../protocol/segment/index.ts';
import { END_STATE, opening, write } from './opening.ts';

const read = (path: string): string => readFileSync(new URL(`../../../protocol/${path}`, import.meta.url), 'utf8');

describe('the segment section of the README', () => {
  const section = read('README.md').split('\n## Segment\n')[1] ?? '';

  it("holds the header's table as it stands beside the code", () => {
    const rows = read('segment/header.ts')
      .split('\n')
      .filter((line) => line.startsWith(' * |'))
      .map((line) => line.slice(3));
    expect(rows.length).toBeGreaterThan(15);
    expect(section).toContain(rows.join('\n'));
  });

  it('names the limits as the code has them', () => {
    const stated = [...section.matchAll(/^\| `(MAX_\w+)` \| (\d+) \|/gm)].map(([, name, value]) => [
      name,
      Number(value),
    ]);
    const actual = Object.entries(segment).filter(([name]) => name.startsWith('MAX_'));
    expect(Object.fromEntries(stated)).toEqual(Object.fromEntries(actual));
  });
});

describe('the header as written', () => {
  it('stands where the table says', () => {
    const how = opening(3, { number: 300, signalCount: 2, keyed: true, residualScaleSteps: Float64Array.of(1, 2, 3) });
    const ticks = [{ lattice: [1, 2, 3], predicted: [1, 2, 3] }];
    const bytes = Buffer.from(write(how, ticks));
    expect(bytes.toString('latin1', 0, 4)).toBe('SWS1');
    expect([...bytes.subarray(4, 7)]).toEqual([1, 1, 1 | 2]);
    expect(bytes.subarray(7, 15)).toEqual(Buffer.from(how.stream));
    expect(bytes.subarray(15, 47)).toEqual(Buffer.from(how.bundle));
    // 300 = 44 + 2 × 128; 28401120 = 96 + 59 × 128 + 69 × 128² + 13 × 128³.
    expect([...bytes.subarray(47, 56)]).toEqual([128 + 44, 2, 128 + 96, 128 + 59, 128 + 69, 13, 1, 3, 2]);
    expect(bytes.toString('utf8', 57, 67)).toBe('north-well');
    expect([bytes[56], bytes[67]]).toEqual([10, 7]);
    expect(bytes.toString('utf8', 68, 75)).toBe('gw-0017');
    expect(bytes.readUInt32BE(75)).toBe(stateCheck(how.startState));
    expect(bytes.readUInt32BE(79)).toBe(stateCheck(END_STATE));
  });

  it('costs at most 110 bytes with names of ordinary length', () => {
    expect(write(opening(8), []).length).toBeLessThanOrEqual(110);
  });
});
