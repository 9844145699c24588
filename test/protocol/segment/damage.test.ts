/** Hostile and damaged bytes: each is refused by ProtocolError 'segment', in bounded time and memory. */
import { crc32, deflateRawSync } from 'node:zlib';
import { describe, expect, it } from 'vitest';
import { ProtocolError } from '../../../protocol/errors.ts';
import { ByteSink } from '../../../protocol/segment/bytes.ts';
import { encodeCorrections } from '../../../protocol/segment/corrections.ts';
import { MAX_SEGMENT_BYTES, MAX_SEGMENT_TICKS, readSegmentHead } from '../../../protocol/segment/index.ts';
import { SegmentWriter } from '../../../protocol/segment/writer.ts';
import { END_STATE, opening, read, type Tick } from './opening.ts';

const how = opening(2, { keyed: true });
const ticks: Tick[] = Array.from({ length: 60 }, (_, t) => ({
  lattice: [(t * 37) % 23, t % 9 === 0 ? Number.NaN : (t * 11) % 7],
  predicted: [11.2, 3],
}));

function sample(): Uint8Array {
  const writer = new SegmentWriter(how);
  for (const { lattice, predicted } of ticks) writer.push(Float64Array.from(lattice), Float64Array.from(predicted));
  writer.correct(how.firstTick + 9, 1, 4);
  return writer.finish(END_STATE);
}

/** Puts the right checksum behind whatever the bytes are: the attacker knows CRC-32 too. */
function withChecksum(body: Uint8Array): Uint8Array {
  const bytes = new Uint8Array(body.length + 4);
  bytes.set(body);
  new DataView(bytes.buffer).setUint32(body.length, crc32(body));
  return bytes;
}

function refusal(bytes: Uint8Array, scales = how.residualScaleSteps): ProtocolError | null {
  try {
    read(bytes, scales, ticks);
    return null;
  } catch (error) {
    if (!(error instanceof ProtocolError) || error.code !== 'segment') throw error;
    return error;
  }
}

/** A header of our making; every part may be wrong. */
function forge(parts: Partial<Record<string, number | Uint8Array>>): Uint8Array {
  const sink = new ByteSink();
  const put = (name: string, usual: number | Uint8Array): void => {
    const value = parts[name] ?? usual;
    if (typeof value === 'number') sink.varint(value);
    else sink.bytes(value);
  };
  put('magic', Uint8Array.from(Buffer.from('SWS1')));
  put('format', 1);
  put('arithmetic', 1);
  put('flags', 0);
  put('stream', new Uint8Array(8));
  put('number', 1);
  put('firstTick', 1000);
  put('ticks', 2);
  put('channels', 2);
  put('signals', 2);
  put('site', Uint8Array.of(1, 97));
  put('gateway', Uint8Array.of(1, 98));
  put('checks', new Uint8Array(8));
  put('rest', new Uint8Array(0));
  put('payload', new Uint8Array(0));
  return withChecksum(sink.finish());
}

describe('a damaged segment', () => {
  it('is refused whichever single bit is turned', () => {
    const bytes = sample();
    expect(refusal(bytes)).toBeNull();
    for (let at = 0; at < bytes.length; at++)
      for (let bit = 0; bit < 8; bit++) {
        const turned = bytes.slice();
        turned[at]! ^= 1 << bit;
        expect(refusal(turned), `byte ${at}, bit ${bit}`).not.toBeNull();
      }
  });

  it('is refused when cut anywhere or extended', () => {
    const bytes = sample();
    for (let length = 0; length < bytes.length; length++)
      expect(refusal(bytes.subarray(0, length)), `${length} bytes`).not.toBeNull();
    for (const extra of [1, 3, 4, 5, 100]) {
      const longer = new Uint8Array(bytes.length + extra);
      longer.set(bytes);
      expect(refusal(longer), `${extra} more`).not.toBeNull();
    }
  });

  it('is refused when the payload is cut short or goes on, though the checksum is right', () => {
    const body = sample().slice(0, -4);
    for (const cut of [5, 6, 12, 30])
      expect(refusal(withChecksum(body.subarray(0, body.length - cut)))?.message).toMatch(/payload|off the lattice/);
    const longer = new Uint8Array(body.length + 5);
    longer.set(body);
    expect(refusal(withChecksum(longer))?.message).toMatch(/payload: expected/);
  });

  it('never crashes or hangs on any payload under a right checksum', () => {
    const body = sample().slice(0, -4);
    let seed = 7;
    for (let i = 0; i < 400; i++) {
      const changed = body.slice();
      for (let j = 0; j < 1 + (i % 9); j++) {
        seed = (Math.imul(seed, 1_664_525) + 1_013_904_223) >>> 0;
        changed[7 + ((seed >>> 8) % (changed.length - 7))] = seed & 255;
      }
      refusal(withChecksum(changed));
    }
  });
});

describe('a hostile header', () => {
  it('passes while nothing is wrong with it', () => {
    expect(readSegmentHead(forge({})).ticks).toBe(2);
  });

  const bomb = deflateRawSync(new Uint8Array(8 * 1024 * 1024));
  const keyed = (deflated: Uint8Array): Uint8Array => {
    const sink = new ByteSink();
    sink.varint(deflated.length);
    sink.bytes(deflated);
    return sink.finish();
  };
  const corrections = (count: number, bytes: Uint8Array): Uint8Array => {
    const sink = new ByteSink();
    sink.varint(count);
    sink.varint(bytes.length);
    sink.bytes(bytes);
    return sink.finish();
  };
  const strange = encodeCorrections([{ tick: 1, channel: 200, index: 5 }], 1000);
  const wrong: [string, Parameters<typeof forge>[0], RegExp][] = [
    ['another magic', { magic: Uint8Array.from(Buffer.from('SWB1')) }, /magic/],
    ['a later format', { format: 4 }, /format: expected 1..3, got 4/],
    ['the coarser format with nothing coarse', { format: 3 }, /flags: expected 8/],
    ['a later arithmetic', { arithmetic: 99 }, /arithmetic version/],
    ['an unknown flag', { flags: 8 }, /flags/],
    ['a number past 32 bits', { number: 2 ** 32 }, /number: expected/],
    ['a first tick past what a number holds', { firstTick: Number.MAX_SAFE_INTEGER }, /first tick/],
    ['too many ticks', { ticks: MAX_SEGMENT_TICKS + 1 }, /ticks: expected/],
    ['no channels', { channels: 0 }, /channels: expected/],
    ['too many channels', { channels: 257 }, /channels: expected/],
    ['more signals than channels', { signals: 3 }, /signals: expected 0..2/],
    ['ticks × channels past the limit', { ticks: 60_000, channels: 200 }, /size: expected at most/],
    ['a number in more bytes than it needs', { number: Uint8Array.of(0x81, 0x00) }, /shortest form/],
    ['a number without end', { number: new Uint8Array(9).fill(0xff) }, /at most 8 bytes/],
    ['a name longer than the segment', { site: Uint8Array.of(60, 97) }, /cut short|site/],
    ['an empty name', { site: Uint8Array.of(0) }, /site length/],
    ['a name that is not UTF-8', { gateway: Uint8Array.of(2, 0xc3, 0x28) }, /gateway: expected UTF-8/],
    ['a name that climbs folders', { gateway: Uint8Array.of(2, 46, 46) }, /gateway: expected a name/],
    ['a start state that inflates without bound', { flags: 1, rest: keyed(bomb) }, /start state: expected raw DEFLATE/],
    ['a start state that is not deflated', { flags: 1, rest: keyed(Uint8Array.of(7, 7, 7)) }, /raw DEFLATE/],
    ['a start state with bytes behind', { flags: 1, rest: keyed(Uint8Array.of(3, 0, 9)) }, /nothing after/],
    ['a start state of another check', { flags: 1, rest: keyed(deflateRawSync(END_STATE)) }, /expected check 00000000/],
    ['more corrections than allowed', { flags: 4, rest: corrections(70_000, END_STATE) }, /correction count/],
    ['corrections that are not there', { flags: 4, rest: Uint8Array.of(3, 200, 1) }, /correction bytes/],
    [
      'a correction of a channel that is not there',
      { flags: 4, rest: corrections(1, strange) },
      /correction 0: expected a channel below 2/,
    ],
    [
      'a correction before 1970',
      { flags: 4, rest: corrections(1, encodeCorrections([{ tick: -1, channel: 0, index: 5 }], 1000)) },
      /correction 0/,
    ],
    [
      'a correction past any index',
      { flags: 4, rest: corrections(1, encodeCorrections([{ tick: 1, channel: 0, index: 2 ** 50 }], 1000)) },
      /correction 0/,
    ],
    [
      'corrections that end early',
      { flags: 4, rest: corrections(9, strange.subarray(0, 1)) },
      /corrections: expected more/,
    ],
  ];
  it.each(wrong)('is refused: %s', (_, parts, message) => {
    expect(refusal(forge(parts))?.message).toMatch(message);
  });

  it('is refused by size before anything is read', () => {
    expect(refusal(new Uint8Array(MAX_SEGMENT_BYTES + 1))?.message).toMatch(/size/);
    expect(refusal(new Uint8Array(0))?.message).toMatch(/size/);
  });

  it('is refused when the scales are of another site', () => {
    expect(refusal(sample(), new Float64Array(3))?.message).toMatch(/residual scales: expected 2, got 3/);
  });
});

describe('a writer', () => {
  it('refuses what no reader would take, before anything is coded', () => {
    const writer = new SegmentWriter(opening(1));
    const push = (index: number): void => writer.push(Float64Array.of(index), Float64Array.of(0));
    for (const index of [0.5, 2 ** 40 + 1, Number.POSITIVE_INFINITY])
      expect(() => push(index)).toThrow(/whole lattice index/);
    expect(writer.ticks).toBe(0);
    expect(() => writer.push(new Float64Array(2), new Float64Array(1))).toThrow(/expected 1 channels/);
    expect(() => writer.correct(-1, 0, 1)).toThrow(/correction tick/);
    expect(() => writer.correct(1, 1, 1)).toThrow(/correction channel/);
    expect(() => writer.correct(1, 0, Number.NaN)).toThrow(/got NaN/);
    writer.finish(END_STATE);
    expect(() => push(1)).toThrow(/closed/);
  });

  it('refuses an opening that cannot be written', () => {
    expect(() => new SegmentWriter(opening(0))).toThrow(/channels/);
    expect(() => new SegmentWriter(opening(1, { site: 'a/b' }))).toThrow(/site: expected a name/);
    expect(() => new SegmentWriter(opening(1, { stream: new Uint8Array(7) }))).toThrow(/stream id bytes/);
    expect(() => new SegmentWriter(opening(1, { bundle: new Uint8Array(31) }))).toThrow(/bundle digest bytes/);
    expect(() => new SegmentWriter(opening(1, { number: -1 }))).toThrow(/number/);
    expect(() => new SegmentWriter(opening(1, { residualScaleSteps: new Float64Array(2) }))).toThrow(/residual scales/);
  });

  it('says when it is full', () => {
    const writer = new SegmentWriter(opening(1));
    const zero = new Float64Array(1);
    while (!writer.isFull) writer.push(zero, zero);
    expect(writer.ticks).toBe(MAX_SEGMENT_TICKS);
    expect(() => writer.push(zero, zero)).toThrow(/full/);
    expect(writer.finish(END_STATE).length).toBeLessThan(200);
  });
});
