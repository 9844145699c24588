/**
 * Bytes of released formats that must open for ever. `sealed-bundle-1.swb` was written when envelope 1 and bundle format 1
 * were first released: a small synthetic bundle (no fitted model) sealed by the key pair of seed 0x5a × 32 under epoch 1,
 * sequence 42. It is a pin of our own making, not an outside reference; the digest was checked with `sha256sum` over the
 * bytes from 128 on.
 */
import { readFileSync } from 'node:fs';
import { expect, test } from 'vitest';
import { bundleDigest, decodeBundle, encodeBundle } from '../../protocol/bundle-document.ts';
import { toHex } from '../../protocol/digest.ts';
import { createKeyPair, publicHalf } from '../../protocol/keys.ts';
import { openSealed, sealBundle } from '../../protocol/seal.ts';
import { dequantise } from '../../protocol/tensor.ts';

const frozen = Uint8Array.from(readFileSync(new URL('../vectors/sealed-bundle-1.swb', import.meta.url)));
const expected = JSON.parse(readFileSync(new URL('../vectors/sealed-bundle-1.json', import.meta.url), 'utf8')) as {
  bytes: number;
  digest: string;
  epoch: number;
  sequence: number;
  publicKey: string;
  site: string;
  channels: string[];
  readoutRow0: number[];
};

test('a sealed bundle of format 1 opens, with its digest and its numbers', () => {
  const trusted = { kind: 'author' as const, publicKey: Uint8Array.from(Buffer.from(expected.publicKey, 'hex')) };
  const opened = openSealed(frozen, [trusted]);
  expect(frozen.length).toBe(expected.bytes);
  expect(toHex(opened.digest)).toBe(expected.digest);
  expect([opened.epoch, opened.sequence]).toEqual([expected.epoch, expected.sequence]);
  const bundle = decodeBundle(opened.document);
  expect(bundle.site).toBe(expected.site);
  expect(bundle.channels.map((channel) => channel.name)).toEqual(expected.channels);
  const { readout } = bundle.linear!;
  expect([...dequantise(readout).subarray(0, readout.cols)]).toEqual(expected.readoutRow0);
});

test('it is still written to the same bytes', () => {
  const key = createKeyPair(new Uint8Array(32).fill(0x5a));
  const { document, epoch, sequence } = openSealed(frozen, [publicHalf(key)]);
  expect(encodeBundle(decodeBundle(document))).toStrictEqual(document);
  expect(toHex(bundleDigest(document))).toBe(expected.digest);
  expect(sealBundle(document, { epoch, sequence }, [key])).toStrictEqual(frozen);
});
