/** Headers that a rightful key signed but this version does not know: refused by the layout, not by the signature. */
import { describe, expect, test } from 'vitest';
import { readEnvelope } from '../../protocol/envelope.ts';
import { createKeyPair, signBytes } from '../../protocol/keys.ts';
import { openSealed, sealBundle } from '../../protocol/seal.ts';
import { refusalOf } from '../support/refusal.ts';

const key = createKeyPair(new Uint8Array(32).fill(4));
const document = Uint8Array.of(1, 2, 3);

/** Seals, writes bytes into the header, and signs the header as it then stands. */
const signedWith = (offset: number, bytes: readonly number[]): Uint8Array => {
  const sealed = sealBundle(document, { epoch: 0, sequence: 1 }, [key]);
  sealed.set(bytes, offset);
  const header = sealed.slice(0, 56);
  header[5] = 0;
  const message = Buffer.concat([Buffer.from('stillwell bundle v1\n'), header, document]);
  sealed.set(signBytes(key, message), 64);
  return sealed;
};

describe('a signed header', () => {
  test('is accepted when nothing in it is strange: the signing above is the right one', () => {
    expect(openSealed(signedWith(12, [0, 0, 0, 7]), [key]).epoch).toBe(7);
  });

  test.each([
    ['another magic', 0, [0x53, 0x57, 0x42, 0x32], 'byte 0: expected "SWB1", got "SWB2"'],
    ['another version', 4, [2], 'byte 4: expected envelope version 1, got 2'],
    ['no signatures', 5, [0], 'byte 5: expected 1 to 4 signatures, got 0'],
    ['too many signatures', 5, [5], 'byte 5: expected 1 to 4 signatures, got 5'],
    ['a reserved bit in use', 6, [0, 1], 'byte 6: expected 0, got 1'],
    [
      'a document longer than the file',
      8,
      [0, 0, 0, 4],
      'expected 132 bytes by its own header, got 131: the file is cut short',
    ],
    ['a document shorter than the file', 8, [0, 0, 0, 2], 'something follows the document'],
    ['sequence 0', 16, [0, 0, 0, 0, 0, 0, 0, 0], 'byte 16: expected a sequence from 1 to 2^53 - 1, got 0'],
    [
      'sequence 2^53',
      16,
      [0, 0x20, 0, 0, 0, 0, 0, 0],
      'byte 16: expected a sequence from 1 to 2^53 - 1, got 9007199254740992',
    ],
  ])('with %s is refused', (_, offset, bytes, message) => {
    const sealed = signedWith(offset, bytes);
    for (const action of [() => openSealed(sealed, [key]), () => readEnvelope(sealed)]) {
      const refusal = refusalOf(action);
      expect(refusal.code).toBe('envelope');
      expect(refusal.message).toContain(message);
    }
  });

  test('with the digest of another document is refused by the digest', () => {
    expect(refusalOf(() => openSealed(signedWith(24, [0, 0]), [key])).code).toBe('digest');
  });
});
