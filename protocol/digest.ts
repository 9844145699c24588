/**
 * SHA-256 (FIPS 180-4) and the text digests go by.
 */
import { createHash } from 'node:crypto';

/** SHA-256 over the parts one after another; 32 bytes. */
export const sha256 = (...parts: readonly (Uint8Array | string)[]): Uint8Array => {
  const hash = createHash('sha256');
  for (const part of parts) hash.update(part);
  return Uint8Array.from(hash.digest());
};

/** Lower-case hexadecimal. */
export const toHex = (bytes: Uint8Array): string =>
  Buffer.from(bytes.buffer, bytes.byteOffset, bytes.byteLength).toString('hex');
