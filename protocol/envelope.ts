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
 * A signature (seal.ts) is over "stillwell bundle v1\n", then bytes 0 to 55 with byte 5 as 0 (so that signatures can be
 * added), then the document. This file knows the layout alone; it verifies neither digest nor signatures.
 */
import { sha256, toHex } from './digest.ts';
import { ProtocolError } from './errors.ts';
import { KEY_ID_BYTES, SIGNATURE_BYTES } from './keys.ts';
import { MAX_BUNDLE_BYTES } from './limits.ts';

/** First bytes of every sealed bundle. */
export const ENVELOPE_MAGIC = 'SWB1';
/** Version of the layout above; any other is refused. */
export const ENVELOPE_VERSION = 1;
/** Most signatures an envelope carries. */
export const MAX_SIGNATURES = 4;

/** Bytes before the first signature. */
export const HEADER_BYTES = 56;
const ENTRY_BYTES = KEY_ID_BYTES + SIGNATURE_BYTES;
const DIGEST_BYTES = 32;

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

/** Refuses a sealed bundle, saying what was expected and got. */
export const refuseSealed = (
  code: 'size' | 'envelope' | 'digest' | 'signature',
  message: string,
  details: Record<string, unknown> = {},
): never => {
  throw new ProtocolError(code, `sealed bundle: ${message}`, { details });
};

const checkNumber = (name: string, value: number, least: number, most: number): void => {
  if (!Number.isSafeInteger(value) || value < least || value > most) {
    refuseSealed('envelope', `${name}: expected a whole number from ${least} to ${most}, got ${value}`);
  }
};

/**
 * Writes an envelope around a document: header, signatures in the order given, document.
 *
 * shapes  header 56 bytes, as `writeHeader` made it for the same document and count
 */
export const writeEnvelope = (
  header: Uint8Array,
  signatures: readonly EnvelopeSignature[],
  document: Uint8Array,
): Uint8Array => {
  const entries = signatures.flatMap(({ keyId, signature }) => [keyId, signature]);
  return Uint8Array.from(Buffer.concat([header, ...entries, document]));
};

/**
 * Writes the first 56 bytes for a document and a count of signatures.
 *
 * throws  ProtocolError 'envelope' for numbers or counts out of bounds, 'size' when the whole would pass MAX_BUNDLE_BYTES
 */
export const writeHeader = (document: Uint8Array, numbers: SealNumbers, count: number): Uint8Array => {
  checkNumber('key epoch', numbers.epoch, 0, 2 ** 32 - 1);
  checkNumber('sequence', numbers.sequence, 1, Number.MAX_SAFE_INTEGER);
  checkNumber('count of signing keys', count, 1, MAX_SIGNATURES);
  if (document.length === 0) refuseSealed('envelope', 'expected a document, got no bytes');
  const total = HEADER_BYTES + ENTRY_BYTES * count + document.length;
  if (total > MAX_BUNDLE_BYTES)
    refuseSealed('size', `expected at most ${MAX_BUNDLE_BYTES} bytes, got ${total}`, { bytes: total });
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

const checkHeader = (bytes: Uint8Array): { count: number; start: number } => {
  if (bytes.length > MAX_BUNDLE_BYTES) {
    refuseSealed('size', `expected at most ${MAX_BUNDLE_BYTES} bytes, got ${bytes.length}`, { bytes: bytes.length });
  }
  const magic = Buffer.from(bytes.subarray(0, 4)).toString('latin1');
  if (bytes.length >= 4 && magic !== ENVELOPE_MAGIC) {
    refuseSealed(
      'envelope',
      `byte 0: expected "${ENVELOPE_MAGIC}", got ${JSON.stringify(magic)}: this is no sealed bundle; give one that \`stillwell seal\` wrote`,
    );
  }
  if (bytes.length < HEADER_BYTES) {
    refuseSealed(
      'envelope',
      `expected a header of ${HEADER_BYTES} bytes, got ${bytes.length}: the file is cut short; get it again`,
    );
  }
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  const version = view.getUint8(4);
  if (version !== ENVELOPE_VERSION) {
    refuseSealed('envelope', `byte 4: expected envelope version ${ENVELOPE_VERSION}, got ${version}`, { version });
  }
  const count = view.getUint8(5);
  if (count < 1 || count > MAX_SIGNATURES) {
    refuseSealed('envelope', `byte 5: expected 1 to ${MAX_SIGNATURES} signatures, got ${count}`);
  }
  if (view.getUint16(6) !== 0) refuseSealed('envelope', `byte 6: expected 0, got ${view.getUint16(6)}`);
  const start = HEADER_BYTES + ENTRY_BYTES * count;
  const total = start + view.getUint32(8);
  if (total !== bytes.length) {
    const why =
      total > bytes.length ? 'the file is cut short; get it again' : 'something follows the document; get it again';
    refuseSealed('envelope', `expected ${total} bytes by its own header, got ${bytes.length}: ${why}`);
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
    refuseSealed('envelope', `byte 16: expected a sequence from 1 to 2^53 - 1, got ${sequence}`);
  }
  const signatures = Array.from({ length: count }, (_, i) => {
    const at = HEADER_BYTES + ENTRY_BYTES * i;
    return Object.freeze({
      keyId: bytes.slice(at, at + KEY_ID_BYTES),
      signature: bytes.slice(at + KEY_ID_BYTES, at + ENTRY_BYTES),
    });
  });
  if (new Set(signatures.map((entry) => toHex(entry.keyId))).size !== count) {
    refuseSealed('envelope', 'expected signatures by distinct keys, got one key twice');
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
