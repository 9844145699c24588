/**
 * RFC 8032 (Josefsson, Liusvaara, 2017), section 7.1 "Test Vectors for Ed25519": TEST 1, TEST 2, TEST 3, TEST SHA(abc).
 * Checked against public copies of the section. TEST 1024 is left out for its length. The id of a key is ours and is
 * held against SHA-256 of FIPS 180-4 as node:crypto computes it, through a second call.
 */
import { createHash } from 'node:crypto';
import { describe, expect, test } from 'vitest';
import {
  createKeyPair,
  formatKey,
  keyIdOf,
  parseKey,
  publicHalf,
  signBytes,
  verifyBytes,
} from '../../protocol/keys.ts';

const bytes = (hex: string): Uint8Array => Uint8Array.from(Buffer.from(hex, 'hex'));
const hex = (value: Uint8Array): string => Buffer.from(value).toString('hex');

const vectors = [
  {
    name: 'TEST 1',
    secret: '9d61b19deffd5a60ba844af492ec2cc44449c5697b326919703bac031cae7f60',
    public: 'd75a980182b10ab7d54bfed3c964073a0ee172f3daa62325af021a68f707511a',
    message: '',
    signature:
      'e5564300c360ac729086e2cc806e828a84877f1eb8e5d974d873e065224901555fb8821590a33bacc61e39701cf9b46bd25bf5f0595bbe24655141438e7a100b',
  },
  {
    name: 'TEST 2',
    secret: '4ccd089b28ff96da9db6c346ec114e0f5b8a319f35aba624da8cf6ed4fb8a6fb',
    public: '3d4017c3e843895a92b70aa74d1b7ebc9c982ccf2ec4968cc0cd55f12af4660c',
    message: '72',
    signature:
      '92a009a9f0d4cab8720e820b5f642540a2b27b5416503f8fb3762223ebdb69da085ac1e43e15996e458f3613d0f11d8c387b2eaeb4302aeeb00d291612bb0c00',
  },
  {
    name: 'TEST 3',
    secret: 'c5aa8df43f9f837bedb7442f31dcb7b166d38535076f094b85ce3a2e0b4458f7',
    public: 'fc51cd8e6218a1a38da47ed00230f0580816ed13ba3303ac5deb911548908025',
    message: 'af82',
    signature:
      '6291d657deec24024827e69c3abe01a30ce548a284743a445e3680d7db5ac3ac18ff9b538d16f290ae67f760984dc6594a7c15e9716ed28dc027beceea1ec40a',
  },
  {
    name: 'TEST SHA(abc)',
    secret: '833fe62409237b9d62ec77587520911e9a759cec1d19755b7da901b96dca3d42',
    public: 'ec172b93ad5e563bf4932c70e1245034c35467ef2efd4d64ebf819683467e2bf',
    message:
      'ddaf35a193617abacc417349ae20413112e6fa4e89a97ea20a9eeee64b55d39a2192992a274fc1a836ba3c23a3feebbd454d4423643ce80e2a9ac94fa54ca49f',
    signature:
      'dc2a4459e7369633a52b1bf277839a00201009a3efbf3ecb69bea2186c26b58909351fc9ac90b3ecfdfbc7c66431e0303dca179c138ac17ad9bef1177331a704',
  },
];

describe.each(vectors)('RFC 8032 section 7.1 $name', (vector) => {
  const key = createKeyPair(bytes(vector.secret));
  const message = bytes(vector.message);

  test('public key, signature, verification', () => {
    expect(hex(key.publicKey)).toBe(vector.public);
    expect(hex(signBytes(key, message))).toBe(vector.signature);
    expect(verifyBytes(bytes(vector.public), message, bytes(vector.signature))).toBe(true);
  });

  test('a changed message, signature or key does not verify', () => {
    const other = Uint8Array.of(...message, 0);
    expect(verifyBytes(bytes(vector.public), other, bytes(vector.signature))).toBe(false);
    for (const at of [0, 31, 32, 63]) {
      const changed = bytes(vector.signature);
      changed[at]! ^= 1;
      expect(verifyBytes(bytes(vector.public), message, changed)).toBe(false);
    }
    const strange = bytes(vector.public);
    strange[0]! ^= 1;
    expect(verifyBytes(strange, message, bytes(vector.signature))).toBe(false);
  });

  test('a key file keeps both halves', () => {
    expect(parseKey(formatKey(key))).toStrictEqual(key);
    expect(parseKey(formatKey(publicHalf(key)))).toStrictEqual({ kind: 'author', publicKey: bytes(vector.public) });
    const id = createHash('sha256').update(bytes(vector.public)).digest().subarray(0, 8).toString('hex');
    expect(hex(keyIdOf(key.publicKey))).toBe(id);
  });
});

test('a signature whose second half has the group order added is refused (RFC 8032 section 5.1.7, 0 <= S < L)', () => {
  const vector = vectors[1]!;
  const order = 2n ** 252n + 27742317777372353535851937790883648493n;
  const signature = bytes(vector.signature);
  let s = 0n;
  for (let i = 63; i >= 32; i--) s = (s << 8n) | BigInt(signature[i]!);
  s += order;
  for (let i = 32; i < 64; i++) {
    signature[i] = Number(s & 255n);
    s >>= 8n;
  }
  expect(verifyBytes(bytes(vector.public), bytes(vector.message), signature)).toBe(false);
});
