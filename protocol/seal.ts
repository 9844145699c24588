/**
 * The envelope that closes a bundle: fixed binary, big-endian, verified before anything inside is parsed.
 *
 *   offset  size  meaning
 *        0     4  magic "SWB1"
 *        4     1  envelope version, 1
 *        5     1  count of signatures, 1 to 4
 *        6     2  reserved, 0
 *        8     4  length of the document
 *       12     4  key epoch: a rotation of keys starts a new one
 *       16     8  sequence number, at most 2^53 - 1; only ever rises within an epoch
 *       24    32  SHA-256 of the document
 *       56    72  for each signature: key id (8), Ed25519 signature (64)
 *              n  the document, and nothing after it
 *
 * A signature is over "stillwell bundle v1\n", then bytes 0 to 55 with byte 5 as 0 (so signatures can be added), then the
 * document. Raw bytes are signed, never a re-encoding. Not encryption: a bundle is readable by anyone who has it.
 */
import { createHash } from 'node:crypto';
import { ProtocolError } from './errors.ts';
import {
  KEY_ID_BYTES,
  type KeyPair,
  keyIdOf,
  type PublicKey,
  SIGNATURE_BYTES,
  signBytes,
  type TrustedKeys,
  verifyBytes,
} from './keys.ts';
import { MAX_BUNDLE_BYTES } from './limits.ts';

/** First bytes of every sealed bundle. */
export const ENVELOPE_MAGIC = 'SWB1';
/** Version of the layout above; any other is refused. */
export const ENVELOPE_VERSION = 1;
/** Most signatures an envelope carries. */
export const MAX_SIGNATURES = 4;

const HEADER_BYTES = 56;
const ENTRY_BYTES = KEY_ID_BYTES + SIGNATURE_BYTES;
const DIGEST_BYTES = 32;
const SIGNED_PREFIX = Buffer.from('stillwell bundle v1\n', 'ascii');

/** Where a sealed bundle stands in the order of its site's bundles. */
export interface SealNumbers {
  /** 0 to 2^32 - 1. */
  readonly epoch: number;
  /** 1 to 2^53 - 1. */
  readonly sequence: number;
}

/** One signature as the envelope carries it. */
export interface EnvelopeSignature {
  readonly keyId: Uint8Array;
  readonly signature: Uint8Array;
}

/** An envelope taken apart; nothing in it is verified beyond its own layout. */
export interface Envelope extends SealNumbers {
  readonly version: number;
  /** As the header states it; `openSealed` holds it against the document. */
  readonly digest: Uint8Array;
  readonly signatures: readonly EnvelopeSignature[];
  readonly document: Uint8Array;
}

/** A verified bundle: `document` may now be decoded. */
export interface OpenedBundle extends SealNumbers {
  readonly document: Uint8Array;
  readonly digest: Uint8Array;
  /** Ids of the trusted author keys whose signatures hold. */
  readonly keyIds: readonly Uint8Array[];
}

const hex = (bytes: Uint8Array): string => Buffer.from(bytes.buffer, bytes.byteOffset, bytes.length).toString('hex');

const refuse = (code: 'size' | 'envelope' | 'digest' | 'signature', message: string, details = {}): never => {
  throw new ProtocolError(code, `sealed bundle: ${message}`, { details });
};

const sha256 = (bytes: Uint8Array): Uint8Array => Uint8Array.from(createHash('sha256').update(bytes).digest());

const signedBytes = (header: Uint8Array, document: Uint8Array): Uint8Array => {
  const open = Buffer.from(header);
  open[5] = 0;
  return Buffer.concat([SIGNED_PREFIX, open, document]);
};

const checkNumber = (name: string, value: number, least: number, most: number): void => {
  if (!Number.isSafeInteger(value) || value < least || value > most) {
    refuse('envelope', `${name}: expected a whole number from ${least} to ${most}, got ${value}`);
  }
};

const writeHeader = (document: Uint8Array, numbers: SealNumbers, count: number): Uint8Array => {
  const header = new Uint8Array(HEADER_BYTES);
  const view = new DataView(header.buffer);
  header.set(Buffer.from(ENVELOPE_MAGIC, 'ascii'), 0);
  view.setUint8(4, ENVELOPE_VERSION);
  view.setUint8(5, count);
  view.setUint32(8, document.length);
  view.setUint32(12, numbers.epoch);
  view.setBigUint64(16, BigInt(numbers.sequence));
  header.set(sha256(document), 24);
  return header;
};

/**
 * Closes a document under a sequence number and signs it with one to four distinct author keys.
 *
 * throws  ProtocolError 'envelope' for numbers or signers out of bounds, 'size' when the whole passes MAX_BUNDLE_BYTES
 * note    the same document, numbers and keys give the same bytes
 */
export const sealBundle = (document: Uint8Array, numbers: SealNumbers, signers: readonly KeyPair[]): Uint8Array => {
  checkNumber('key epoch', numbers.epoch, 0, 2 ** 32 - 1);
  checkNumber('sequence', numbers.sequence, 1, Number.MAX_SAFE_INTEGER);
  checkNumber('count of signing keys', signers.length, 1, MAX_SIGNATURES);
  if (document.length === 0) refuse('envelope', 'expected a document, got no bytes');
  const ids = signers.map((key) => hex(keyIdOf(key.publicKey)));
  if (new Set(ids).size !== ids.length) refuse('envelope', 'expected distinct signing keys, got one twice');
  const wrong = signers.find((key) => key.kind !== 'author');
  if (wrong)
    refuse('signature', `expected author keys to seal with, got a ${wrong.kind} key ${hex(keyIdOf(wrong.publicKey))}`);
  const total = HEADER_BYTES + ENTRY_BYTES * signers.length + document.length;
  if (total > MAX_BUNDLE_BYTES)
    refuse('size', `expected at most ${MAX_BUNDLE_BYTES} bytes, got ${total}`, { bytes: total });
  const header = writeHeader(document, numbers, signers.length);
  const message = signedBytes(header, document);
  const entries = signers.flatMap((key) => [keyIdOf(key.publicKey), signBytes(key, message)]);
  return Uint8Array.from(Buffer.concat([header, ...entries, document]));
};

const checkHeader = (bytes: Uint8Array): { count: number; start: number } => {
  if (bytes.length > MAX_BUNDLE_BYTES) {
    refuse('size', `expected at most ${MAX_BUNDLE_BYTES} bytes, got ${bytes.length}`, { bytes: bytes.length });
  }
  const magic = Buffer.from(bytes.subarray(0, 4)).toString('latin1');
  if (bytes.length >= 4 && magic !== ENVELOPE_MAGIC) {
    refuse('envelope', `byte 0: expected "${ENVELOPE_MAGIC}", got ${JSON.stringify(magic)}: this is no sealed bundle`);
  }
  if (bytes.length < HEADER_BYTES) {
    refuse('envelope', `expected a header of ${HEADER_BYTES} bytes, got ${bytes.length}: the file is cut short`);
  }
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  const version = view.getUint8(4);
  if (version !== ENVELOPE_VERSION) {
    refuse('envelope', `byte 4: expected envelope version ${ENVELOPE_VERSION}, got ${version}`, { version });
  }
  const count = view.getUint8(5);
  if (count < 1 || count > MAX_SIGNATURES) {
    refuse('envelope', `byte 5: expected 1 to ${MAX_SIGNATURES} signatures, got ${count}`);
  }
  if (view.getUint16(6) !== 0) refuse('envelope', `byte 6: expected 0, got ${view.getUint16(6)}`);
  const start = HEADER_BYTES + ENTRY_BYTES * count;
  const total = start + view.getUint32(8);
  if (total !== bytes.length) {
    const why = total > bytes.length ? 'the file is cut short' : 'something follows the document';
    refuse('envelope', `expected ${total} bytes by its own header, got ${bytes.length}: ${why}`);
  }
  return { count, start };
};

/**
 * Takes an envelope apart for showing. Verifies its layout only: neither digest nor signatures.
 *
 * throws  ProtocolError 'size' or 'envelope' with the offset
 */
export const readEnvelope = (bytes: Uint8Array): Envelope => {
  const { count, start } = checkHeader(bytes);
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  const sequence = view.getBigUint64(16);
  if (sequence < 1n || sequence > BigInt(Number.MAX_SAFE_INTEGER)) {
    refuse('envelope', `byte 16: expected a sequence from 1 to 2^53 - 1, got ${sequence}`);
  }
  const signatures = Array.from({ length: count }, (_, i) => {
    const at = HEADER_BYTES + ENTRY_BYTES * i;
    return Object.freeze({
      keyId: bytes.slice(at, at + KEY_ID_BYTES),
      signature: bytes.slice(at + KEY_ID_BYTES, at + ENTRY_BYTES),
    });
  });
  if (new Set(signatures.map((entry) => hex(entry.keyId))).size !== count) {
    refuse('envelope', 'expected signatures by distinct keys, got one key twice');
  }
  return Object.freeze({
    version: view.getUint8(4),
    epoch: view.getUint32(12),
    sequence: Number(sequence),
    digest: bytes.slice(24, 24 + DIGEST_BYTES),
    signatures: Object.freeze(signatures),
    document: bytes.slice(start),
  });
};

const checkSignatures = (envelope: Envelope, message: Uint8Array, trusted: readonly PublicKey[]): Uint8Array[] => {
  const held: Uint8Array[] = [];
  for (const { keyId, signature } of envelope.signatures) {
    const key = trusted.find((one) => hex(keyIdOf(one.publicKey)) === hex(keyId));
    if (key === undefined) continue;
    // A trusted key's signature that fails is damage or an attack, even where another one would hold.
    if (!verifyBytes(key.publicKey, message, signature)) {
      refuse('signature', `the signature by key ${hex(keyId)} does not hold: the bundle was altered or damaged`);
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
  if (hex(digest) !== hex(envelope.digest)) {
    refuse(
      'digest',
      `expected SHA-256 ${hex(envelope.digest)}, got ${hex(digest)}: the document was altered or damaged`,
    );
  }
  const authors = trusted.filter((key) => key.kind === 'author');
  const message = signedBytes(bytes.subarray(0, HEADER_BYTES), envelope.document);
  const keyIds = checkSignatures(envelope, message, authors);
  if (keyIds.length === 0) {
    const signed = envelope.signatures.map((entry) => hex(entry.keyId)).join(', ');
    const known = authors.map((key) => hex(keyIdOf(key.publicKey))).join(', ') || 'none';
    refuse('signature', `expected a signature by a trusted author key (${known}), got one by ${signed}`);
  }
  return Object.freeze({
    document: envelope.document,
    digest,
    epoch: envelope.epoch,
    sequence: envelope.sequence,
    keyIds: Object.freeze(keyIds),
  });
};
