/** Factors on disk: read back as written; refused with one clear error where damaged, foreign or of another version. */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { parseSite, sha256 } from '@stillwell/protocol';
import { afterAll, describe, expect, it } from 'vitest';
import { TrainError } from '../../../trainer/errors.ts';
import { checkBelongs, decodeFactors, encodeFactors, readFactors } from '../../../trainer/factors/file.ts';
import { FactorsGatherer } from '../../../trainer/factors/gather.ts';
import { shapeOf } from '../../../trainer/factors/site-shape.ts';
import { gathered, plantValues } from '../../support/factors-history.ts';
import { edited, GOOD } from '../../support/site-text.ts';

const folder = mkdtempSync(join(tmpdir(), 'factors-'));
afterAll(() => rmSync(folder, { recursive: true }));
const bytes = encodeFactors(gathered(plantValues(600)).end());

function refusal(of: () => unknown): TrainError {
  try {
    of();
  } catch (error) {
    if (error instanceof TrainError) return error;
    throw error;
  }
  throw new Error('nothing was refused');
}

/** The bytes with something changed, and a checksum that matches again. */
function resealed(change: (copy: Uint8Array, view: DataView) => void): Uint8Array {
  const copy = bytes.slice();
  change(copy, new DataView(copy.buffer));
  copy.set(sha256(copy.subarray(0, 24), copy.subarray(56)), 24);
  return copy;
}

describe('a factors file', () => {
  it('is read back as written', () => {
    const path = join(folder, 'a.swf');
    writeFileSync(path, bytes);
    expect(Buffer.compare(encodeFactors(readFactors(path)), bytes)).toBe(0);
  });

  it('begins as its table says', () => {
    expect(new TextDecoder().decode(bytes.subarray(0, 8))).toBe('swfactor');
    const view = new DataView(bytes.buffer);
    expect(view.getUint32(8, true)).toBe(1);
    expect(56 + view.getUint32(12, true) + 8 * Number(view.getBigUint64(16, true))).toBe(bytes.length);
    expect(Buffer.compare(bytes.subarray(24, 56), sha256(bytes.subarray(0, 24), bytes.subarray(56)))).toBe(0);
  });

  it.each([
    ['nothing', new Uint8Array(0), /empty, expected a factors file/],
    [
      'another kind of file',
      new TextEncoder().encode('tick,flow,level,gate of some other site\n1,2,3\n4,5,6'),
      /not a factors file/,
    ],
    ['its first bytes alone', bytes.slice(0, 40), /cut short: 40 bytes/],
    ['half of it', bytes.slice(0, bytes.length >> 1), /cut short: \d+ bytes, expected \d+/],
    ['longer', Buffer.concat([bytes, new Uint8Array(8)]), /8 bytes too many/],
    ['one bit more', resealedNever(), /damaged: its SHA-256 does not match/],
    ['another version', resealed((_, view) => view.setUint32(8, 2, true)), /version 2, this program reads 1/],
    [
      'sizes that contradict',
      resealed((copy) => copy.set(new TextEncoder().encode('"reach":4001'), headAt('"reach":4000'))),
      /sizes contradict each other/,
    ],
    ['a head that is none', resealed((copy) => copy.fill(0x7b, 56, 60)), /sizes contradict each other/],
  ])('is refused where it is %s', (_, spoilt, message) => {
    const error = refusal(() => decodeFactors(spoilt, 'plant.swf'));
    expect(error.code).toBe('factors');
    expect(error.message).toMatch(message);
    expect(error.message).toMatch(/^plant\.swf: .*(give the file|run fit)/);
  });

  it('is refused wherever a byte is changed', () => {
    for (let at = 0; at < bytes.length; at += 9973) {
      const spoilt = bytes.slice();
      spoilt[at]! ^= 0x10;
      expect(refusal(() => decodeFactors(spoilt, 'plant.swf')).code).toBe('factors');
    }
  });

  it('says so where there is none', () => {
    expect(refusal(() => readFactors(join(folder, 'none.swf'))).code).toBe('file');
  });
});

describe('belonging to a site', () => {
  const site = parseSite(GOOD);
  const factors = (text: string) => new FactorsGatherer(shapeOf(parseSite(text), null)).end();

  it('is given for the same signals and tick', () => {
    expect(() => checkBelongs(factors(GOOD), site, 'plant.swf')).not.toThrow();
    expect(() => checkBelongs(factors(edited('horizon: 2h', 'horizon: 3h')), site, 'plant.swf')).not.toThrow();
  });

  it.each([
    ['another site', edited('mill-lane', 'mill-road'), /of site mill-road, expected mill-lane/],
    ['another tick', edited('tick: 1min', 'tick: 2min'), /of a tick of 120000 ms, expected 60000 ms/],
    ['another signal', edited('name: inflow', 'name: outflow'), /of a channel 2 called outflow, expected inflow; give/],
    ['another unit', edited('unit: mm/h', 'unit: mm'), /of rain in mm, expected mm\/h/],
    [
      'a shorter horizon',
      edited('horizon: 2h', 'horizon: 50min'),
      /of horizons up to 100 ticks, expected at least 120/,
    ],
    ['another aggregate', edited('aggregate: last', 'aggregate: mean'), /of schema .*roles or aggregates differ/],
  ])('is refused for %s', (_, text, message) => {
    const error = refusal(() => checkBelongs(factors(text), site, 'plant.swf'));
    expect(error.code).toBe('factors');
    expect(error.message).toMatch(message);
    expect(error.message).toMatch(/give the factors of this site/);
  });
});

function resealedNever(): Uint8Array {
  const spoilt = bytes.slice();
  spoilt[bytes.length - 5]! ^= 1;
  return spoilt;
}

function headAt(text: string): number {
  const at = Buffer.from(bytes).indexOf(text);
  if (at < 0) throw new Error(`${text} is not in the head`);
  return at;
}
