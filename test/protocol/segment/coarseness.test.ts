/** Segments whose readings lie on every 2nd, 4th, … step: what goes in comes back, and nothing else is let in. */
import { crc32 } from 'node:zlib';
import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import {
  coarseIndex,
  MAX_COARSENESS,
  MAX_INDEX,
  readSegmentHead,
  SegmentReader,
  SegmentWriter,
} from '../../../protocol/segment/index.ts';
import { END_STATE, opening, read, write } from './opening.ts';

const SEED = 20_260_105;

const run = fc.integer({ min: 1, max: 9 }).chain((channels) =>
  fc.record({
    coarseness: fc.array(fc.integer({ min: 0, max: MAX_COARSENESS }), { minLength: channels, maxLength: channels }),
    ticks: fc.array(
      fc.record({
        lattice: fc.array(fc.oneof(fc.integer({ min: -MAX_INDEX, max: MAX_INDEX }), fc.constant(Number.NaN)), {
          minLength: channels,
          maxLength: channels,
        }),
        predicted: fc.array(fc.oneof(fc.double(), fc.constant(Number.NaN)), {
          minLength: channels,
          maxLength: channels,
        }),
      }),
      { maxLength: 20 },
    ),
  }),
);

describe('a coarser segment', () => {
  it('gives the rounded readings back and says how coarse they are', () => {
    fc.assert(
      fc.property(run, ({ coarseness, ticks }) => {
        const scales = new Float64Array(coarseness.length).fill(300);
        const rounded = ticks.map(({ lattice, predicted }) => ({
          lattice: lattice.map((index, c) => coarseIndex(index, coarseness[c]!)),
          predicted,
        }));
        const how = opening(coarseness.length, {
          residualScaleSteps: scales,
          coarseness: Uint8Array.from(coarseness),
        });
        const bytes = write(how, rounded);
        const head = readSegmentHead(bytes);
        expect(Array.from(head.coarseness)).toEqual(coarseness);
        expect(head.format).toBe(coarseness.some((power) => power > 0) ? 3 : 1);
        expect(read(bytes, scales, rounded)).toEqual(rounded.map(({ lattice }) => lattice.map((k) => k + 0)));
      }),
      { seed: SEED, numRuns: 120 },
    );
  });

  it('saves about a bit a reading for each doubling, while steps stay below the residuals', () => {
    const sizes = [0, 1, 2, 3].map((power) => {
      let state = 7;
      const next = (): number => {
        state = (Math.imul(state, 1_664_525) + 1_013_904_223) >>> 0;
        return state / 2 ** 32;
      };
      const ticks = Array.from({ length: 2000 }, () => ({
        lattice: [coarseIndex(Math.round(40 * (next() + next() + next() + next() - 2)), power)],
        predicted: [0],
      }));
      const how = opening(1, { residualScaleSteps: Float64Array.of(23), coarseness: Uint8Array.of(power) });
      return (8 * write(how, ticks).length) / 2000;
    });
    for (let power = 1; power < sizes.length; power++) {
      expect(sizes[power - 1]! - sizes[power]!).toBeGreaterThan(0.9);
      expect(sizes[power - 1]! - sizes[power]!).toBeLessThan(1.1);
    }
  });

  it('keeps late readings as they came', () => {
    const writer = new SegmentWriter(opening(2, { coarseness: Uint8Array.of(4, 0) }));
    writer.push(Float64Array.of(32, 5), Float64Array.of(30, 5));
    writer.correct(28_401_100, 0, 7);
    const reader = new SegmentReader(writer.finish(END_STATE), new Float64Array(2).fill(4));
    expect(reader.corrections).toEqual([{ tick: 28_401_100, channel: 0, index: 7 }]);
  });

  it('is told the size of residuals in steps of the sensor, none where nothing came', () => {
    const writer = new SegmentWriter(
      opening(2, { residualScaleSteps: Float64Array.of(64, 64), coarseness: Uint8Array.of(3, 0) }),
    );
    writer.push(Float64Array.of(800, Number.NaN), Float64Array.of(800, 1));
    const [first, second] = writer.residualSteps();
    expect(first).toBeGreaterThan(30);
    expect(first).toBeLessThan(70);
    expect(second).toBe(0);
  });

  it('refuses readings off its steps, and powers that no header can say', () => {
    const writer = new SegmentWriter(opening(1, { coarseness: Uint8Array.of(2) }));
    expect(() => writer.push(Float64Array.of(6), Float64Array.of(6))).toThrow(/multiple of 4, got 6/);
    expect(() => new SegmentWriter(opening(1, { coarseness: Uint8Array.of(16) }))).toThrow(/powers of two up to 15/);
    expect(() => new SegmentWriter(opening(2, { coarseness: Uint8Array.of(1) }))).toThrow(/2 powers of two/);
  });

  it('is refused where its head says nothing coarse, or more than it has channels', () => {
    const good = write(opening(3, { coarseness: Uint8Array.of(1, 2, 3) }), []);
    const at = good.indexOf(0x12);
    expect([...good.subarray(at, at + 2)]).toEqual([0x12, 0x30]);
    const turned = (...bytes: number[]): Uint8Array => {
      const copy = Uint8Array.from(good);
      copy.set(bytes, at);
      new DataView(copy.buffer).setUint32(copy.length - 4, crc32(copy.subarray(0, -4)));
      return copy;
    };
    expect(readSegmentHead(turned(0x12, 0x30)).coarseness).toEqual(Uint8Array.of(1, 2, 3));
    expect(() => readSegmentHead(turned(0, 0))).toThrow(/coarseness/);
    expect(() => readSegmentHead(turned(0x12, 0x31))).toThrow(/coarseness/);
  });
});

describe('rounding', () => {
  it('goes to the nearest, halves upwards, and is never -0', () => {
    expect([-6, -3, -2, -1, 0, 1, 2, 3, 6].map((k) => coarseIndex(k, 2))).toEqual([-4, -4, 0, 0, 0, 0, 4, 4, 8]);
    expect(coarseIndex(-1, 0)).toBe(-1);
    expect(coarseIndex(Number.NaN, 3)).toBeNaN();
  });
});
