/**
 * Sealing and opening bundles: Ed25519 signatures over raw bytes, checked before anything inside is parsed. Raw bytes
 * are signed, never a re-encoding. Not encryption: a bundle is readable by anyone who has it.
 */
import { sha256, toHex } from './digest.ts';
import {
  type Envelope,
  HEADER_BYTES,
  readEnvelope,
  refuseSealed,
  type SealNumbers,
  writeEnvelope,
  writeHeader,
} from './envelope.ts';
import { type KeyPair, keyIdOf, type PublicKey, signBytes, type TrustedKeys, verifyBytes } from './keys.ts';

const SIGNED_PREFIX = Buffer.from('stillwell bundle v1\n', 'ascii');

/** A verified bundle: `document` may now be decoded. */
export interface OpenedBundle extends SealNumbers {
  readonly document: Uint8Array;
  readonly digest: Uint8Array;
  /** Ids of the trusted author keys whose signatures hold. */
  readonly keyIds: readonly Uint8Array[];
}

const signedBytes = (header: Uint8Array, document: Uint8Array): Uint8Array => {
  const open = Buffer.from(header);
  open[5] = 0;
  return Buffer.concat([SIGNED_PREFIX, open, document]);
};

/**
 * Closes a document under a sequence number and signs it with one to four distinct author keys.
 *
 * throws  ProtocolError 'envelope' for numbers or signers out of bounds, 'size' when the whole passes MAX_BUNDLE_BYTES
 * note    the same document, numbers and keys give the same bytes
 */
export const sealBundle = (document: Uint8Array, numbers: SealNumbers, signers: readonly KeyPair[]): Uint8Array => {
  const header = writeHeader(document, numbers, signers.length);
  const ids = signers.map((key) => toHex(keyIdOf(key.publicKey)));
  if (new Set(ids).size !== ids.length) refuseSealed('envelope', 'expected distinct signing keys, got one twice');
  const wrong = signers.find((key) => key.kind !== 'author');
  if (wrong)
    refuseSealed(
      'signature',
      `expected author keys to seal with, got a ${wrong.kind} key ${toHex(keyIdOf(wrong.publicKey))}`,
    );
  const message = signedBytes(header, document);
  const signatures = signers.map((key) => ({ keyId: keyIdOf(key.publicKey), signature: signBytes(key, message) }));
  return writeEnvelope(header, signatures, document);
};

const checkSignatures = (envelope: Envelope, message: Uint8Array, trusted: readonly PublicKey[]): Uint8Array[] => {
  const held: Uint8Array[] = [];
  for (const { keyId, signature } of envelope.signatures) {
    const key = trusted.find((one) => toHex(keyIdOf(one.publicKey)) === toHex(keyId));
    if (key === undefined) continue;
    // A trusted key's signature that fails is damage or an attack, even where another one would hold.
    if (!verifyBytes(key.publicKey, message, signature)) {
      refuseSealed(
        'signature',
        `the signature by key ${toHex(keyId)} does not hold: the bundle was altered or damaged; get it again`,
      );
    }
    held.push(keyId);
  }
  return held;
};

/**
 * Opens a sealed bundle: size, layout, digest, then signatures, cheapest first. Nothing inside is parsed.
 *
 * throws  ProtocolError 'size', 'envelope', 'digest', or 'signature' when no trusted author key signed it
 * note    signatures by keys that are not trusted are passed over; one by a trusted key that fails refuses the whole
 */
export const openSealed = (bytes: Uint8Array, trusted: TrustedKeys): OpenedBundle => {
  const envelope = readEnvelope(bytes);
  const digest = sha256(envelope.document);
  if (toHex(digest) !== toHex(envelope.digest)) {
    refuseSealed(
      'digest',
      `expected SHA-256 ${toHex(envelope.digest)}, got ${toHex(digest)}: the document was altered or damaged; get it again`,
    );
  }
  const authors = trusted.filter((key) => key.kind === 'author');
  const message = signedBytes(bytes.subarray(0, HEADER_BYTES), envelope.document);
  const keyIds = checkSignatures(envelope, message, authors);
  if (keyIds.length === 0) {
    const signed = envelope.signatures.map((entry) => toHex(entry.keyId)).join(', ');
    const known = authors.map((key) => toHex(keyIdOf(key.publicKey))).join(', ') || 'none';
    refuseSealed(
      'signature',
      `expected a signature by a trusted author key (${known}), got one by ${signed}; give the key that it was sealed with, or a bundle sealed with that one`,
    );
  }
  return Object.freeze({
    document: envelope.document,
    digest,
    epoch: envelope.epoch,
    sequence: envelope.sequence,
    keyIds: Object.freeze(keyIds),
  });
};
