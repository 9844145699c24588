/**
 * Ed25519 keys (RFC 8032) as small JSON text, and the names keys go by in envelopes. Author keys seal bundles; rollout
 * keys sign orders; one never stands in for the other.
 */
import { createPrivateKey, createPublicKey, type KeyObject, randomBytes, sign, verify } from 'node:crypto';
import { sha256, toHex } from './digest.ts';
import { ProtocolError } from './errors.ts';
import { MAX_KEY_FILE_BYTES } from './limits.ts';

/** What a key may sign: an author seals bundles, rollout signs orders. */
export type KeyKind = 'author' | 'rollout';

/** The half that is given away. */
export interface PublicKey {
  readonly kind: KeyKind;
  /** Raw public key, 32 bytes. */
  readonly publicKey: Uint8Array;
}

/** Both halves; `privateKey` is the 32-byte seed of RFC 8032 section 5.1.5. */
export interface KeyPair extends PublicKey {
  readonly privateKey: Uint8Array;
}

/** Public keys that a gateway believes, each for its own kind of work. */
export type TrustedKeys = readonly PublicKey[];

/** Bytes of a raw key, of either half. */
export const KEY_BYTES = 32;
/** Bytes of a signature. */
export const SIGNATURE_BYTES = 64;
/** Bytes of the id a key goes by in an envelope. */
export const KEY_ID_BYTES = 8;

// RFC 8410 section 4 and 7: the fixed DER around a raw public key and around a raw seed.
const PUBLIC_PREFIX = Buffer.from('302a300506032b6570032100', 'hex');
const PRIVATE_PREFIX = Buffer.from('302e020100300506032b657004220420', 'hex');

const REMEDY = 'give a file that `stillwell keys new` wrote';

const refuse = (where: string, what: string, cause?: unknown): never => {
  throw new ProtocolError('key', `${where}: ${what}`, { details: { where }, cause });
};

const publicObject = (raw: Uint8Array): KeyObject =>
  createPublicKey({ key: Buffer.concat([PUBLIC_PREFIX, raw]), format: 'der', type: 'spki' });

const privateObject = (seed: Uint8Array): KeyObject =>
  createPrivateKey({ key: Buffer.concat([PRIVATE_PREFIX, seed]), format: 'der', type: 'pkcs8' });

const publicOf = (seed: Uint8Array): Uint8Array => {
  const der = createPublicKey(privateObject(seed)).export({ format: 'der', type: 'spki' });
  return Uint8Array.from(der.subarray(PUBLIC_PREFIX.length));
};

/**
 * Makes a key pair, from 32 random bytes unless a seed is given.
 *
 * shapes  seed 32 bytes
 * throws  ProtocolError 'key' on a seed of another length
 * source  RFC 8032 section 5.1.5
 */
export const createKeyPair = (seed: Uint8Array = randomBytes(KEY_BYTES), kind: KeyKind = 'author'): KeyPair => {
  if (seed.length !== KEY_BYTES) refuse('key seed', `expected ${KEY_BYTES} bytes, got ${seed.length}`);
  return Object.freeze({ kind, publicKey: publicOf(seed), privateKey: Uint8Array.from(seed) });
};

/** The id a key goes by: the first 8 bytes of SHA-256 over the raw 32-byte public key. */
export const keyIdOf = (publicKey: Uint8Array): Uint8Array => sha256(publicKey).slice(0, KEY_ID_BYTES);

/** Signs bytes: 64 bytes, the same for the same key and message (RFC 8032 section 5.1.6). */
export const signBytes = (key: KeyPair, message: Uint8Array): Uint8Array =>
  Uint8Array.from(sign(null, message, privateObject(key.privateKey)));

/** Whether a signature over bytes is the key's (RFC 8032 section 5.1.7). Never throws on a malformed key or signature. */
export const verifyBytes = (publicKey: Uint8Array, message: Uint8Array, signature: Uint8Array): boolean => {
  if (publicKey.length !== KEY_BYTES || signature.length !== SIGNATURE_BYTES) return false;
  return verify(null, message, publicObject(publicKey), signature);
};

/** Text of a key file. A pair is written with its private half; pass `publicHalf(pair)` for the file to give away. */
export const formatKey = (key: PublicKey | KeyPair): string => {
  const text: Record<string, string> = {
    kind: key.kind,
    id: toHex(keyIdOf(key.publicKey)),
    public: toHex(key.publicKey),
  };
  if ('privateKey' in key) text.private = toHex(key.privateKey);
  return `${JSON.stringify(text, null, 2)}\n`;
};

/** The half to give away. */
export const publicHalf = (key: PublicKey): PublicKey => Object.freeze({ kind: key.kind, publicKey: key.publicKey });

/** Whether the private half is there, so that it can sign. */
export const isKeyPair = (key: PublicKey | KeyPair): key is KeyPair => 'privateKey' in key;

const readHex = (fields: Record<string, unknown>, name: string, fileName: string): Uint8Array => {
  const text = fields[name];
  if (typeof text !== 'string' || !/^[0-9a-fA-F]{64}$/.test(text)) {
    const got = typeof text === 'string' ? `${text.length} characters` : text === undefined ? 'nothing' : typeof text;
    refuse(fileName, `"${name}": expected ${KEY_BYTES} bytes as 64 hexadecimal digits, got ${got}; ${REMEDY}`);
  }
  return Uint8Array.from(Buffer.from(text as string, 'hex'));
};

const parseFields = (text: string, fileName: string): Record<string, unknown> => {
  if (text.length > MAX_KEY_FILE_BYTES) {
    refuse(fileName, `expected a key file of at most ${MAX_KEY_FILE_BYTES} bytes, got ${text.length}; ${REMEDY}`);
  }
  try {
    const fields: unknown = JSON.parse(text);
    if (typeof fields === 'object' && fields !== null && !Array.isArray(fields))
      return fields as Record<string, unknown>;
  } catch (cause) {
    refuse(fileName, `expected a key file (JSON text), got something else; ${REMEDY}`, cause);
  }
  return refuse(
    fileName,
    `expected a key file (a JSON object with "kind" and "public"), got another JSON value; ${REMEDY}`,
  );
};

/**
 * Reads a key file.
 *
 * throws  ProtocolError 'key' naming file, field, expected and got; also when the halves do not belong together
 */
export const parseKey = (text: string, fileName = 'key file'): PublicKey | KeyPair => {
  const fields = parseFields(text, fileName);
  const known = ['kind', 'id', 'public', 'private'];
  const unknown = Object.keys(fields).find((name) => !known.includes(name));
  if (unknown !== undefined) refuse(fileName, `"${unknown}" is not a field of a key file (${known.join(', ')})`);
  const { kind } = fields;
  if (kind !== 'author' && kind !== 'rollout') {
    return refuse(
      fileName,
      `"kind": expected "author" or "rollout", got ${JSON.stringify(kind) ?? 'nothing'}; ${REMEDY}`,
    );
  }
  const publicKey = readHex(fields, 'public', fileName);
  const id = toHex(keyIdOf(publicKey));
  if (fields.id !== undefined && fields.id !== id) {
    refuse(fileName, `"id": expected ${id} for this public key, got ${JSON.stringify(fields.id)}`);
  }
  if (fields.private === undefined) return Object.freeze({ kind, publicKey });
  const privateKey = readHex(fields, 'private', fileName);
  if (Buffer.compare(publicOf(privateKey), publicKey) !== 0) {
    refuse(fileName, '"private" and "public" do not belong together; make a new pair with `stillwell keys`');
  }
  return Object.freeze({ kind, publicKey, privateKey });
};
