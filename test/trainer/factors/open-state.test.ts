/** Snapshots of a gatherer at work: going on from one is going on without one, to the bit. */
import { describe, expect, it } from 'vitest';
import type { FactorsShape } from '../../../trainer/factors/factors.ts';
import { encodeFactors } from '../../../trainer/factors/file.ts';
import { FactorsGatherer } from '../../../trainer/factors/gather.ts';
import { plantValues, seriesOf, shape } from '../../support/factors-history.ts';

const ticks = 6000;
const chunk = 97;

/** Runs longer than a block, short ones, a hundred ends, wild readings, and channels that stay away. */
const values = plantValues(ticks);
for (let t = 700; t < 4000; t += 31) values[(t / 31) & 1 ? 0 : 1]!.fill(Number.NaN, t, t + 9);
values[0]!.fill(Number.NaN, 4000, 4200);
values[0]![5000] = 1e6;
values[2]!.fill(Number.NaN, 5400, 5404);

function interruptedAt(of: FactorsShape, isStopped: (n: number) => boolean): Buffer {
  let gatherer = new FactorsGatherer(of);
  for (let t = 0, n = 0; t < ticks; t += chunk, n++) {
    gatherer.take(seriesOf(values, t, Math.min(ticks, t + chunk)));
    if (!isStopped(n)) continue;
    const bytes = gatherer.snapshot();
    gatherer = FactorsGatherer.restore(of, bytes);
    // What came back is all there was.
    expect(Buffer.compare(gatherer.snapshot(), bytes)).toBe(0);
  }
  return Buffer.from(encodeFactors(gatherer.end()));
}

describe.each([null, 900])('half-life %s', (halfLifeTicks) => {
  const of: FactorsShape = { ...shape, reach: 1200, halfLifeTicks };
  const whole = interruptedAt(of, () => false);

  it('gives the same bytes, interrupted after every chunk', () => {
    expect(interruptedAt(of, () => true).equals(whole)).toBe(true);
  });

  it.each([0, 3, 7, 20, 41, 43, 55, 61])('gives the same bytes, interrupted after chunk %i', (stop) => {
    expect(interruptedAt(of, (n) => n === stop).equals(whole)).toBe(true);
  });

  it('does not disturb what goes on', () => {
    const gatherer = new FactorsGatherer(of);
    for (let t = 0; t < ticks; t += chunk) {
      gatherer.take(seriesOf(values, t, Math.min(ticks, t + chunk)));
      gatherer.snapshot();
    }
    expect(whole.equals(encodeFactors(gatherer.end()))).toBe(true);
  });
});

describe('a snapshot', () => {
  const gatherer = new FactorsGatherer(shape);
  gatherer.take(seriesOf(values, 0, 500));
  const bytes = gatherer.snapshot();

  it('of nothing yet is good too', () => {
    const again = FactorsGatherer.restore(shape, new FactorsGatherer(shape).snapshot());
    again.take(seriesOf(values, 0, 500));
    expect(Buffer.compare(again.snapshot(), bytes)).toBe(0);
  });

  it('that is no good says why', () => {
    const damaged = bytes.slice();
    damaged[damaged.length >> 1]! ^= 1;
    const newer = bytes.slice();
    newer[8]!++;
    const restore = (from: Uint8Array, of = shape) => FactorsGatherer.restore(of, from);
    expect(() => restore(damaged)).toThrow(/of no use: damaged: its SHA-256 does not match; begin anew/);
    expect(() => restore(newer)).toThrow(/a snapshot of factors of version 2, this program reads 1/);
    expect(() => restore(bytes.subarray(0, 4000))).toThrow(/cut short: 4000 bytes, expected \d+/);
    expect(() => restore(bytes.subarray(0, 0))).toThrow(/empty, expected a snapshot/);
    expect(() => restore(encodeFactors(gatherer.end()))).toThrow(/of no use: not a snapshot of factors;/);
    expect(() => restore(bytes, { ...shape, halfLifeTicks: 900 })).toThrow(/of another site or of other options/);
  });
});
