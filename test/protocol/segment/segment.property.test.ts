import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { MAX_INDEX, SegmentReader, SegmentWriter } from '../../../protocol/segment/index.ts';
import { END_STATE, opening, read, type Tick, write } from './opening.ts';

const SEED = 20_260_101;

const index = fc.oneof(
  { weight: 6, arbitrary: fc.integer({ min: -40, max: 40 }) },
  { weight: 2, arbitrary: fc.maxSafeInteger().map((k) => k % MAX_INDEX) },
  { weight: 1, arbitrary: fc.constantFrom(MAX_INDEX, -MAX_INDEX, 0) },
  { weight: 2, arbitrary: fc.constant(Number.NaN) },
);
const forecast = fc.oneof(
  { weight: 5, arbitrary: fc.double({ min: -50, max: 50, noNaN: true }) },
  { weight: 1, arbitrary: fc.double() },
  { weight: 1, arbitrary: fc.constantFrom(Number.NaN, Number.POSITIVE_INFINITY, 1e300, -1e300) },
);
const scale = fc.oneof(
  fc.double({ min: 1e-6, max: 1e6, noNaN: true }),
  fc.constantFrom(0, -1, Number.NaN, Number.POSITIVE_INFINITY, 1e300, 5e-324),
);

const run = fc.integer({ min: 1, max: 20 }).chain((channels) =>
  fc.record({
    channels: fc.constant(channels),
    scales: fc.array(scale, { minLength: channels, maxLength: channels }),
    keyed: fc.boolean(),
    ticks: fc.array(
      fc.record({
        lattice: fc.array(index, { minLength: channels, maxLength: channels }),
        predicted: fc.array(forecast, { minLength: channels, maxLength: channels }),
      }),
      { maxLength: 40 },
    ),
    corrections: fc.array(
      fc.record({
        tick: fc.integer({ min: 0, max: 2 ** 31 }),
        channel: fc.integer({ min: 0, max: channels - 1 }),
        index: fc.maxSafeInteger().map((k) => (k % MAX_INDEX) + 0),
      }),
      { maxLength: 20 },
    ),
  }),
);

describe('a segment gives back what went in', () => {
  it('for any readings, gaps, forecasts, scales and corrections', () => {
    fc.assert(
      fc.property(run, ({ channels, scales, keyed, ticks, corrections }) => {
        const residualScaleSteps = Float64Array.from(scales);
        const how = opening(channels, { residualScaleSteps, keyed });
        const writer = new SegmentWriter(how);
        for (const t of ticks) writer.push(Float64Array.from(t.lattice), Float64Array.from(t.predicted));
        for (const c of corrections) writer.correct(c.tick, c.channel, c.index);
        const bytes = writer.finish(END_STATE);
        const reader = new SegmentReader(bytes, residualScaleSteps);
        expect(reader.corrections).toEqual(corrections);
        expect(reader.head.startState).toEqual(keyed ? how.startState : null);
        const wanted = ticks.map((t) => t.lattice.map((k) => k + 0));
        expect(read(bytes, residualScaleSteps, ticks)).toEqual(wanted);
      }),
      { seed: SEED, numRuns: 150 },
    );
  });

  it('for long runs of one kind', () => {
    const kinds: Record<string, (t: number, c: number) => number> = {
      constant: () => 450,
      'all missing': () => Number.NaN,
      'missing by turns': (t, c) => ((t + c) % 2 === 0 ? Number.NaN : t),
      counting: (t) => 3 * t,
      'two levels': (t, c) => ((t >> (c + 1)) & 1) * 700,
      'from end to end': (t) => (t % 2 === 0 ? MAX_INDEX : -MAX_INDEX),
      'equal channels': (t) => (t * t * 31) % 997,
      'nought then wild': (t) => (t < 900 ? 0 : (t * 7919) % 10_007),
    };
    for (const [name, kind] of Object.entries(kinds)) {
      let before = [Number.NaN, Number.NaN, Number.NaN];
      const ticks: Tick[] = Array.from({ length: 1200 }, (_, t) => {
        const lattice = [0, 1, 2].map((c) => kind(t, c));
        const tick = { lattice, predicted: before };
        before = lattice;
        return tick;
      });
      const how = opening(3);
      expect(read(write(how, ticks), how.residualScaleSteps, ticks), name).toEqual(ticks.map((t) => t.lattice));
    }
  });

  it('for a segment without ticks, with one tick, and with as many channels as a site may have', () => {
    for (const [channels, count] of [
      [1, 0],
      [1, 1],
      [256, 3],
    ] as const) {
      const ticks = Array.from({ length: count }, (_, t) => ({
        lattice: Array.from({ length: channels }, (_, c) => 1000 * c + t),
        predicted: new Array<number>(channels).fill(Number.NaN),
      }));
      const how = opening(channels);
      expect(read(write(how, ticks), how.residualScaleSteps, ticks)).toEqual(ticks.map((t) => t.lattice));
    }
  });

  it('byte for byte the same from the same pushes', () => {
    const ticks = Array.from({ length: 50 }, (_, t) => ({ lattice: [t * t, -t], predicted: [t * t + 0.4, -t - 0.6] }));
    expect(write(opening(2), ticks)).toEqual(write(opening(2), ticks));
  });

  it('is refused, not misread, when the replay ends elsewhere', () => {
    const how = opening(1);
    const reader = new SegmentReader(write(how, []), how.residualScaleSteps);
    reader.checkState('start', how.startState);
    reader.checkState('end', END_STATE);
    expect(() => reader.checkState('end', Uint8Array.of(5, 4, 3, 2, 0))).toThrow(/end state: expected check/);
    expect(() => reader.checkState('start', END_STATE)).toThrow(/start state: expected check/);
  });
});
