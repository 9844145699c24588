import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { sha256 } from '../../protocol/digest.ts';
import { readEnvelope } from '../../protocol/envelope.ts';
import { createKeyPair, keyIdOf, publicHalf } from '../../protocol/keys.ts';
import { openSealed, sealBundle } from '../../protocol/seal.ts';
import { refusalOf } from '../support/refusal.ts';

const keys = [1, 2, 3, 4, 5].map((byte) => createKeyPair(new Uint8Array(32).fill(byte)));
const [alice, bob, carol] = keys as [(typeof keys)[0], (typeof keys)[0], (typeof keys)[0]];
const rollout = createKeyPair(new Uint8Array(32).fill(9), 'rollout');
const document = Uint8Array.from({ length: 50 }, (_, i) => i);

describe('sealing and opening', () => {
  test('any document, numbers and set of keys come back', () => {
    fc.assert(
      fc.property(
        fc.uint8Array({ minLength: 1, maxLength: 400 }),
        fc.nat(2 ** 32 - 1),
        fc.integer({ min: 1, max: Number.MAX_SAFE_INTEGER }),
        fc.subarray(keys, { minLength: 1, maxLength: 4 }),
        (bytes, epoch, sequence, signers) => {
          const sealed = sealBundle(bytes, { epoch, sequence }, signers);
          expect(sealBundle(bytes, { epoch, sequence }, signers)).toStrictEqual(sealed);
          const opened = openSealed(sealed, signers.map(publicHalf));
          expect(opened).toStrictEqual({
            document: bytes,
            digest: sha256(bytes),
            epoch,
            sequence,
            keyIds: signers.map((key) => keyIdOf(key.publicKey)),
          });
          expect(sealed.length).toBe(56 + 72 * signers.length + bytes.length);
        },
      ),
      { seed: 20260304, numRuns: 60 },
    );
  });

  test('the layout, byte by byte', () => {
    const sealed = sealBundle(document, { epoch: 0x01020304, sequence: 0x05060708090a }, [alice]);
    const view = new DataView(sealed.buffer);
    expect(Buffer.from(sealed.subarray(0, 4)).toString()).toBe('SWB1');
    expect([...sealed.subarray(4, 8)]).toEqual([1, 1, 0, 0]);
    expect(view.getUint32(8)).toBe(50);
    expect([...sealed.subarray(12, 24)]).toEqual([1, 2, 3, 4, 0, 0, 5, 6, 7, 8, 9, 10]);
    expect(sealed.slice(24, 56)).toStrictEqual(sha256(document));
    expect(sealed.slice(56, 64)).toStrictEqual(keyIdOf(alice.publicKey));
    expect(sealed.slice(128)).toStrictEqual(document);
  });

  test('the same document under a higher number keeps its digest', () => {
    const first = openSealed(sealBundle(document, { epoch: 0, sequence: 1 }, [alice]), [alice]);
    const again = openSealed(sealBundle(document, { epoch: 0, sequence: 2 }, [alice]), [alice]);
    expect(again.digest).toStrictEqual(first.digest);
  });

  test('one trusted author among several signers is enough; the ids name the trusted ones', () => {
    const sealed = sealBundle(document, { epoch: 0, sequence: 1 }, [bob, alice]);
    expect(openSealed(sealed, [publicHalf(alice), publicHalf(carol)]).keyIds).toStrictEqual([keyIdOf(alice.publicKey)]);
  });

  test('an envelope can be read for showing without any key', () => {
    const envelope = readEnvelope(sealBundle(document, { epoch: 3, sequence: 9 }, [alice, bob]));
    expect([envelope.epoch, envelope.sequence, envelope.signatures.length]).toEqual([3, 9, 2]);
    expect(envelope.document).toStrictEqual(document);
  });
});

describe('sealing is refused', () => {
  const numbers = { epoch: 0, sequence: 1 };
  test.each([
    [
      'without keys',
      () => sealBundle(document, numbers, []),
      'count of signing keys: expected a whole number from 1 to 4, got 0',
    ],
    ['with five keys', () => sealBundle(document, numbers, keys), 'got 5'],
    ['with one key twice', () => sealBundle(document, numbers, [alice, alice]), 'expected distinct signing keys'],
    [
      'with a rollout key',
      () => sealBundle(document, numbers, [rollout]),
      'expected author keys to seal with, got a rollout key',
    ],
    ['without a document', () => sealBundle(new Uint8Array(0), numbers, [alice]), 'expected a document, got no bytes'],
    [
      'under sequence 0',
      () => sealBundle(document, { epoch: 0, sequence: 0 }, [alice]),
      'sequence: expected a whole number from 1',
    ],
    ['past 2^53 - 1', () => sealBundle(document, { epoch: 0, sequence: 2 ** 53 }, [alice]), 'sequence: expected'],
    ['under a broken epoch', () => sealBundle(document, { epoch: -1, sequence: 1 }, [alice]), 'key epoch: expected'],
    [
      'past the largest size',
      () => sealBundle(new Uint8Array(65_409), numbers, [alice]),
      'at most 65536 bytes, got 65537',
    ],
  ])('%s', (_, action, message) => {
    expect(refusalOf(action).message).toContain(message);
  });
});

describe('opening is refused', () => {
  const sealed = sealBundle(document, { epoch: 0, sequence: 1 }, [alice]);

  test('without a trusted author key, saying which are known and which signed', () => {
    const refusal = refusalOf(() => openSealed(sealed, [publicHalf(bob)]));
    expect(refusal.code).toBe('signature');
    expect(refusal.message).toContain(Buffer.from(keyIdOf(bob.publicKey)).toString('hex'));
    expect(refusal.message).toContain(Buffer.from(keyIdOf(alice.publicKey)).toString('hex'));
    expect(refusalOf(() => openSealed(sealed, [])).message).toContain('author key (none)');
  });

  test('by a key trusted for rollout only', () => {
    expect(refusalOf(() => openSealed(sealed, [{ ...publicHalf(alice), kind: 'rollout' }])).code).toBe('signature');
  });

  test('when a trusted signature fails although another one holds', () => {
    const two = sealBundle(document, { epoch: 0, sequence: 1 }, [alice, bob]);
    two[56 + 72 + 20]! ^= 1;
    const refusal = refusalOf(() => openSealed(two, [alice, bob]));
    expect(refusal.message).toContain('does not hold: the bundle was altered or damaged');
  });

  test('when one key signs twice', () => {
    const two = sealBundle(document, { epoch: 0, sequence: 1 }, [alice, bob]);
    two.set(two.slice(56, 128), 128);
    expect(refusalOf(() => openSealed(two, [alice, bob])).message).toContain('got one key twice');
  });

  test.each([
    ['another file', Uint8Array.from(Buffer.from('site: mill-lane\n'.repeat(9))), 'this is no sealed bundle'],
    ['nothing', new Uint8Array(0), 'expected a header of 56 bytes, got 0'],
    ['too much', new Uint8Array(65_537), 'expected at most 65536 bytes'],
  ])('for %s', (_, bytes, message) => {
    expect(refusalOf(() => openSealed(bytes, [alice])).message).toContain(message);
  });
});
