/**
 * Damage to a sealed bundle: cut, lengthened, one bit turned anywhere, parts of two bundles joined. Nothing damaged is
 * opened, and nothing inside is looked at before the signatures hold: the decoder and the scanner are replaced by ones
 * that count, and no refused bundle reaches them.
 */
import fc from 'fast-check';
import { afterEach, describe, expect, test, vi } from 'vitest';
import { createKeyPair, type KeyPair } from '../../protocol/keys.ts';
import { recurrence, sampleBundle } from '../support/sample-bundle.ts';

const reached = vi.hoisted(() => ({ scans: 0 }));
vi.mock('../../protocol/scan.ts', async (original) => {
  const real = await original<typeof import('../../protocol/scan.ts')>();
  return {
    ...real,
    scanMessagePack: (...args: Parameters<typeof real.scanMessagePack>) => {
      reached.scans++;
      real.scanMessagePack(...args);
    },
  };
});
const { ProtocolError } = await import('../../protocol/errors.ts');
const { decodeBundle, encodeBundle } = await import('../../protocol/bundle-document.ts');
const { openSealed, sealBundle } = await import('../../protocol/seal.ts');

const key = createKeyPair(new Uint8Array(32).fill(5));
const stranger = createKeyPair(new Uint8Array(32).fill(6));
const seal = (seed: number, signers: KeyPair[] = [key]): Uint8Array =>
  sealBundle(
    encodeBundle(sampleBundle({ signals: 1, inputs: 0, horizon: 3 }, seed)),
    { epoch: 1, sequence: 5 },
    signers,
  );
const sealed = seal(1);

/** What a receiver does with bytes: open, and decode only what was opened. */
const load = (bytes: Uint8Array): string => {
  try {
    decodeBundle(openSealed(bytes, [key]).document);
    return 'accepted';
  } catch (error) {
    if (!(error instanceof ProtocolError)) throw error;
    expect(error.message).toMatch(/^sealed bundle: .*(expected|does not hold)/);
    return error.code;
  }
};

afterEach(() => {
  reached.scans = 0;
});

describe('a sealed bundle', () => {
  test('is accepted whole, and then the scanner is reached: the count below can fail', () => {
    expect(load(sealed)).toBe('accepted');
    expect(reached.scans).toBe(1);
  });

  test('cut at any byte is refused', () => {
    for (let length = 0; length < sealed.length; length++) expect(load(sealed.subarray(0, length))).toBe('envelope');
    expect(reached.scans).toBe(0);
  });

  test('with anything behind it is refused', () => {
    expect(load(Uint8Array.of(...sealed, 0))).toBe('envelope');
    expect(load(Uint8Array.of(...sealed, ...sealed))).toBe('envelope');
    expect(reached.scans).toBe(0);
  });

  test('with one bit turned, anywhere, is refused', () => {
    const codes = new Map<string, number>();
    const bytes = Uint8Array.from(sealed);
    // Every bit of header and signature; beyond, one bit of every byte, another from byte to byte.
    for (let bit = 0; bit < bytes.length * 8; bit++) {
      const at = bit >> 3;
      if (at >= 128 && (bit & 7) !== at % 8) continue;
      bytes[at]! ^= 1 << (bit & 7);
      const code = load(bytes);
      codes.set(code, (codes.get(code) ?? 0) + 1);
      bytes[at]! ^= 1 << (bit & 7);
    }
    expect([...codes.keys()].sort()).toEqual(['digest', 'envelope', 'signature']);
    expect(bytes).toStrictEqual(sealed);
    expect(reached.scans).toBe(0);
  });

  test('after 1 to 64 edits, cuts or splices is refused', () => {
    const other = seal(2);
    const edit = fc.tuple(fc.nat(sealed.length - 1), fc.nat(255));
    fc.assert(
      fc.property(fc.array(edit, { minLength: 1, maxLength: 64 }), fc.nat(3), (edits, way) => {
        let bytes = Uint8Array.from(sealed);
        if (way === 1)
          bytes = Uint8Array.from([...bytes.subarray(0, edits[0]![0]), edits[0]![1], ...bytes.subarray(edits[0]![0])]);
        else if (way === 2) bytes.set(other.subarray(edits[0]![0], edits[0]![0] + 1 + edits[0]![1]), edits[0]![0]);
        else for (const [at, byte] of edits) bytes[at] = byte;
        if (Buffer.compare(bytes, sealed) === 0) return;
        expect(load(bytes)).not.toBe('accepted');
      }),
      { seed: 20260305, numRuns: 1500 },
    );
    expect(reached.scans).toBe(0);
  });

  test('joined of two valid bundles is refused, whichever part is exchanged', () => {
    const other = seal(2);
    expect(other.length).toBe(sealed.length);
    const cuts = [0, 4, 8, 12, 16, 24, 56, 64, 128, sealed.length];
    for (let i = 0; i + 1 < cuts.length; i++) {
      const bytes = Uint8Array.from(sealed);
      bytes.set(other.subarray(cuts[i], cuts[i + 1]), cuts[i]);
      const isSame = Buffer.compare(bytes, sealed) === 0;
      expect(load(bytes) === 'accepted').toBe(isSame);
      reached.scans = 0;
    }
  });

  test('signed by a stranger is refused even with the id of the trusted key written in', () => {
    const foreign = seal(1, [stranger]);
    expect(load(foreign)).toBe('signature');
    foreign.set(sealed.subarray(56, 64), 56);
    expect(load(foreign)).toBe('signature');
    expect(reached.scans).toBe(0);
  });

  test('of random bytes behind a right beginning is refused', () => {
    const next = recurrence(3);
    for (let round = 0; round < 300; round++) {
      const bytes = Uint8Array.from({ length: 4 + (next() % 400) }, () => next() >>> 24);
      bytes.set(Buffer.from('SWB1'), 0);
      if (bytes.length > 8) bytes.set([1, 1, 0, 0], 4);
      expect(load(bytes)).not.toBe('accepted');
    }
    expect(reached.scans).toBe(0);
  });
});
