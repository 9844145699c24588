/** Released segments stay readable, and the coded readings come out the same on every machine. */
import { readFileSync } from 'node:fs';
import { describe, expect, it } from 'vitest';
import { readSegmentHead, SegmentReader, SegmentWriter } from '../../../protocol/segment/index.ts';

interface Vector {
  readonly name: string;
  readonly head: {
    readonly site: string;
    readonly gateway: string;
    readonly stream: string;
    readonly number: number;
    readonly bundle: string;
    readonly firstTick: number;
    readonly channelCount: number;
    readonly signalCount: number;
    readonly residualScaleSteps: readonly number[];
    readonly startState: string;
    readonly keyed: boolean;
    readonly coarseness?: readonly number[];
  };
  readonly endState: string;
  readonly lattice: readonly (readonly (number | null)[])[];
  readonly predicted: readonly (readonly (number | null)[])[];
  readonly corrections: readonly { readonly tick: number; readonly channel: number; readonly index: number }[];
  readonly bytes: string;
}

const segments = [1, 3].flatMap((format) => {
  const file = new URL(`../../vectors/segment-${format}.json`, import.meta.url);
  const { segments: vectors } = JSON.parse(readFileSync(file, 'utf8')) as { segments: Vector[] };
  return vectors.map((vector) => ({ ...vector, format }));
});
const binary = (hex: string): Uint8Array => new Uint8Array(Buffer.from(hex, 'hex'));
const numbers = (row: readonly (number | null)[]): Float64Array => Float64Array.from(row, (v) => v ?? Number.NaN);

describe.each(segments)('segment format $format, $name', (vector) => {
  const { head } = vector;
  const scales = Float64Array.from(head.residualScaleSteps);
  const bytes = binary(vector.bytes);
  const coarseness = Uint8Array.from(head.coarseness ?? new Array<number>(head.channelCount).fill(0));

  it('is read as it was written', () => {
    const reader = new SegmentReader(bytes, scales);
    const { site, gateway, number, firstTick, channelCount, signalCount } = reader.head;
    expect({ site, gateway, number, firstTick, channelCount, signalCount }).toEqual({
      site: head.site,
      gateway: head.gateway,
      number: head.number,
      firstTick: head.firstTick,
      channelCount: head.channelCount,
      signalCount: head.signalCount,
    });
    expect(reader.head.format).toBe(vector.format);
    expect(reader.head.coarseness).toEqual(coarseness);
    expect(reader.head.stream).toEqual(binary(head.stream));
    expect(reader.head.bundle).toEqual(binary(head.bundle));
    expect(reader.head.startState).toEqual(head.keyed ? binary(head.startState) : null);
    expect(reader.corrections).toEqual(vector.corrections);
    const out = new Float64Array(head.channelCount);
    vector.lattice.forEach((row, t) => {
      expect(reader.next(numbers(vector.predicted[t]!), out)).toBe(true);
      expect(out, `tick ${t}`).toEqual(numbers(row));
    });
    expect(reader.next(out, out)).toBe(false);
    reader.checkState('start', binary(head.startState));
    reader.checkState('end', binary(vector.endState));
  });

  it('is written again to the bit', () => {
    const writer = new SegmentWriter({
      ...head,
      stream: binary(head.stream),
      bundle: binary(head.bundle),
      startState: binary(head.startState),
      residualScaleSteps: scales,
      coarseness,
    });
    vector.lattice.forEach((row, t) => {
      writer.push(numbers(row), numbers(vector.predicted[t]!));
    });
    for (const { tick, channel, index } of vector.corrections) writer.correct(tick, channel, index);
    const again = writer.finish(binary(vector.endState));
    if (!head.keyed) {
      expect(again).toEqual(bytes);
      return;
    }
    // DEFLATE may pack otherwise in another zlib; what stands behind it may not change. 4 bytes: the checksum.
    const payload = writer.bytesSoFar;
    expect(again.slice(-4 - payload, -4)).toEqual(bytes.slice(-4 - payload, -4));
    expect(readSegmentHead(again)).toEqual(readSegmentHead(bytes));
  });
});
