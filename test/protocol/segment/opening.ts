/** A segment's opening for tests, invented throughout. */
import { type SegmentOpening, SegmentReader, SegmentWriter } from '../../../protocol/segment/index.ts';

export const END_STATE = Uint8Array.of(5, 4, 3, 2, 1);

export function opening(channelCount: number, changes: Partial<SegmentOpening> = {}): SegmentOpening {
  return {
    site: 'north-well',
    gateway: 'gw-0017',
    stream: Uint8Array.of(1, 2, 3, 4, 5, 6, 7, 8),
    number: 41,
    bundle: Uint8Array.from({ length: 32 }, (_, i) => 200 + i),
    firstTick: 28_401_120,
    channelCount,
    signalCount: channelCount,
    residualScaleSteps: new Float64Array(channelCount).fill(4),
    startState: Uint8Array.from({ length: 120 }, (_, i) => i % 7),
    keyed: false,
    ...changes,
  };
}

/** One tick: lattice indices and what was forecast. */
export interface Tick {
  readonly lattice: readonly number[];
  readonly predicted: readonly number[];
}

export function write(how: SegmentOpening, ticks: readonly Tick[]): Uint8Array {
  const writer = new SegmentWriter(how);
  for (const { lattice, predicted } of ticks) writer.push(Float64Array.from(lattice), Float64Array.from(predicted));
  return writer.finish(END_STATE);
}

/** All readings of a segment, given the forecasts made before each tick. */
export function read(bytes: Uint8Array, scales: Float64Array, ticks: readonly Tick[]): number[][] {
  const reader = new SegmentReader(bytes, scales);
  const out = new Float64Array(reader.head.channelCount);
  const rows: number[][] = [];
  for (const { predicted } of ticks) {
    if (!reader.next(Float64Array.from(predicted), out)) break;
    rows.push(Array.from(out));
  }
  if (reader.next(new Float64Array(out.length), out)) throw new Error('more ticks than were written');
  return rows;
}
