import { crc32 } from 'node:zlib';
import {
  decodeLayout,
  decodePlainState,
  encode,
  encodeLayout,
  encodePlainState,
  layoutDigest,
  layoutOf,
  PLAIN_SEGMENT_FORMAT,
  type ProtocolError,
  readSegmentHead,
  SegmentReader,
  SegmentWriter,
} from '@stillwell/protocol';
import { describe, expect, test } from 'vitest';
import { seededNumbers } from '../../support/models.ts';
import { site } from '../../support/running-site.ts';

const COUNT = 3;
const UNKNOWN = new Float64Array(COUNT).fill(Number.NaN);
const layout = layoutOf(site, [0.01, 0.1, 1]);
const start = encodePlainState({ layout, tick: -1, last: UNKNOWN });
const opening = {
  site: site.site,
  gateway: 'g1',
  stream: new Uint8Array(8).fill(1),
  number: 0,
  bundle: new Uint8Array(32),
  firstTick: 1000,
  channelCount: COUNT,
  signalCount: 2,
  residualScaleSteps: UNKNOWN,
  startState: start,
  keyed: true,
};

interface Row {
  lattice: Float64Array;
  raw: Float64Array;
}

/** Indices, gaps and readings off the lattice, of every size that a float64 has. */
function rows(ticks: number): Row[] {
  const random = seededNumbers(12);
  const view = new DataView(new ArrayBuffer(8));
  const anyDouble = (): number => {
    for (let i = 0; i < 8; i++) view.setUint8(i, Math.floor(256 * random()));
    const value = view.getFloat64(0);
    return Number.isFinite(value) ? value : -0;
  };
  return Array.from({ length: ticks }, (_, n) => {
    const lattice = new Float64Array(COUNT).fill(Number.NaN);
    const raw = new Float64Array(COUNT).fill(Number.NaN);
    for (let c = 0; c < COUNT; c++) {
      const what = random();
      if (what < 0.6) lattice[c] = Math.round(50 * Math.sin(n / 9) + 4 * random()) + 0;
      else if (what < 0.8) raw[c] = anyDouble();
    }
    return { lattice, raw };
  });
}

function written(given: readonly Row[]): Uint8Array {
  const writer = new SegmentWriter({ ...opening, format: PLAIN_SEGMENT_FORMAT });
  for (const { lattice, raw } of given) writer.push(lattice, UNKNOWN, raw);
  return writer.finish(start);
}

describe('a segment without a bundle', () => {
  test('gives back every index, gap and reading off the lattice, to the bit', () => {
    const given = rows(300);
    const bytes = written(given);
    expect(readSegmentHead(bytes)).toMatchObject({ format: 2, bundle: new Uint8Array(32), start: 'keyed' });
    const reader = new SegmentReader(bytes, UNKNOWN);
    const out = new Float64Array(COUNT);
    for (const { lattice, raw } of given) {
      expect(reader.next(UNKNOWN, out)).toBe(true);
      expect(out).toEqual(lattice);
      for (let c = 0; c < COUNT; c++) expect(Object.is(reader.raw![c], raw[c])).toBe(true);
    }
    expect(reader.next(UNKNOWN, out)).toBe(false);
  });

  test('costs nothing more where every reading lies on its lattice', () => {
    const given = rows(300).map(({ lattice }) => ({ lattice, raw: UNKNOWN }));
    const plain = new SegmentWriter(opening);
    for (const { lattice } of given) plain.push(lattice, UNKNOWN);
    // The decision "off the lattice" is asked for at gaps alone, and soon known to be no.
    expect(written(given).length).toBeLessThanOrEqual(plain.finish(start).length + 24);
  });

  test('refuses what is not finite, and readings off the lattice under a bundle', () => {
    const lattice = new Float64Array(COUNT).fill(Number.NaN);
    const writer = new SegmentWriter({ ...opening, format: PLAIN_SEGMENT_FORMAT });
    const endless = Float64Array.of(Number.NaN, Number.POSITIVE_INFINITY, Number.NaN);
    expect(() => writer.push(lattice, UNKNOWN, endless)).toThrow('channel 1: expected a finite reading');
    const ofBundle = new SegmentWriter(opening);
    expect(() => ofBundle.push(lattice, UNKNOWN, UNKNOWN)).toThrow('need the plain format');
    expect(new SegmentReader(new SegmentWriter(opening).finish(start), UNKNOWN).raw).toBeNull();
  });

  test('changed bytes under a right checksum are refused or read, never a reading that is not finite', () => {
    const random = seededNumbers(5);
    const bytes = written(rows(40));
    const out = new Float64Array(COUNT);
    const outcomes = { refused: 0, read: 0 };
    for (let round = 0; round < 200; round++) {
      const changed = bytes.slice();
      for (let i = 0; i < 4; i++) changed[bytes.length - 5 - Math.floor(400 * random())] = Math.floor(256 * random());
      new DataView(changed.buffer).setUint32(changed.length - 4, crc32(changed.subarray(0, -4)));
      try {
        const reader = new SegmentReader(changed, UNKNOWN);
        while (reader.next(UNKNOWN, out))
          for (const value of reader.raw!) expect(Math.abs(value)).not.toBe(Number.POSITIVE_INFINITY);
        outcomes.read++;
      } catch (error) {
        expect((error as ProtocolError).code).toBe('segment');
        outcomes.refused++;
      }
    }
    expect(outcomes.refused).toBeGreaterThan(100);
  });
});

describe('the state of a record without a bundle', () => {
  test('comes back as it was', () => {
    const state = { layout, tick: 77, last: Float64Array.of(12, Number.NaN, -3) };
    expect(decodePlainState(encodePlainState(state))).toEqual(state);
    expect(decodeLayout(encodeLayout(layout))).toEqual(layout);
  });

  test('layouts are told apart by any of their words', () => {
    const others = [
      { ...layout, tickMs: 1000 },
      layoutOf(site, [0.01, 0.1, 0.1]),
      { ...layout, channels: layout.channels.map((one) => ({ ...one, unit: 'kPa' })) },
    ];
    const names = [layout, ...others].map((one) => Buffer.from(layoutDigest(one)).toString('hex'));
    expect(new Set(names).size).toBe(4);
  });

  const whole = { format: 1, kind: 'record', layout, tick: 1, last: [1, 2, 3] };
  test.each([
    ['another format', { ...whole, format: 2 }, 'format'],
    ['a last value too few', { ...whole, last: [1, 2] }, 'expected 3 last values, got 2'],
    ['a last value between indices', { ...whole, last: [1, 2, 0.5] }, 'last.2'],
    ['a step of nought', { ...whole, layout: layoutOf(site, [0, 1, 1]) }, 'layout.channels.0.lattice.step'],
    ['no channels', { ...whole, layout: { ...layout, channels: [] }, last: [] }, 'layout.channels'],
    ['more than it knows', { ...whole, more: 1 }, 'more'],
  ])('refuses %s', (_, value, text) => {
    expect(() => decodePlainState(encode(value))).toThrow(text);
  });
});
