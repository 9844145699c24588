import { describe, expect, it } from 'vitest';
import { SegmentReader, SegmentWriter } from '../../../protocol/segment/index.ts';

describe('segment', () => {
  it('round trips', () => {
    const scales = Float64Array.of(3, 5);
    const state = new Uint8Array([1, 2, 3]);
    const w = new SegmentWriter({
      site: 'a',
      gateway: 'b',
      stream: new Uint8Array(8).fill(7),
      number: 4,
      bundle: new Uint8Array(32).fill(9),
      firstTick: 28000000,
      channelCount: 2,
      signalCount: 1,
      residualScaleSteps: scales,
      startState: state,
      keyed: true,
    });
    const rows: number[][] = [];
    for (let t = 0; t < 500; t++) {
      const row = [
        t % 17 === 0 ? Number.NaN : Math.round(100 * Math.sin(t / 9)),
        t % 5 === 4 ? -(2 ** 40) : 2 ** 40 - t,
      ];
      rows.push(row);
      w.push(Float64Array.from(row), Float64Array.of(Number.NaN, 3.5));
    }
    w.correct(28000003, 1, -5);
    w.correct(28000004, 1, 2 ** 40);
    const bytes = w.finish(state);
    const r = new SegmentReader(bytes, scales);
    const out = new Float64Array(2);
    for (const row of rows) {
      expect(r.next(Float64Array.of(Number.NaN, 3.5), out)).toBe(true);
      expect(Array.from(out)).toEqual(row);
    }
    expect(r.next(out, out)).toBe(false);
    expect(r.corrections).toEqual([
      { tick: 28000003, channel: 1, index: -5 },
      { tick: 28000004, channel: 1, index: 2 ** 40 },
    ]);
    r.checkState('end', state);
  });
});
