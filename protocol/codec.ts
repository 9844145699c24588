/**
 * MessagePack, in and out: the one caller of the MessagePack library. Bytes are scanned before they are decoded
 * (scan.ts); a schema judges what comes out (the caller's). Values are written in one form only (pack.ts), so equal
 * documents are equal bytes. The library's /unpack comes without its streams and its native reader of long text, which
 * start slowly and serve no document of ours.
 */
import { Unpackr } from 'msgpackr/unpack';
import { ProtocolError } from './errors.ts';
import { MAX_BUNDLE_BYTES, MAX_DEPTH, MAX_ITEMS } from './limits.ts';
import { packValue } from './pack.ts';
import { type ScanForm, type ScanLimits, scanMessagePack } from './scan.ts';

const DEFAULT_LIMITS: ScanLimits = { maxBytes: MAX_BUNDLE_BYTES, maxDepth: MAX_DEPTH, maxItems: MAX_ITEMS };

// The library's defaults read private extensions; everything beyond plain data is switched off.
const unpackr = new Unpackr({
  useRecords: false,
  structuredClone: false,
  mapsAsObjects: true,
  int64AsType: 'number',
  copyBuffers: true,
});

/**
 * Writes one plain value (null, booleans, finite numbers, text, Uint8Array, arrays, string-keyed maps) as MessagePack.
 * Equal values give equal bytes whatever the order of their keys.
 *
 * throws  ProtocolError 'encode' naming the path of a value that has no form
 */
export const encode = (value: unknown): Uint8Array => packValue(value);

/**
 * Reads one MessagePack value: sizes first, then the scan, then the library. Binary comes back as Uint8Array copies.
 *
 * units   limits in bytes, levels, values; the defaults are those of a bundle
 * throws  ProtocolError 'size', 'scan' (byte offset in details) or 'decode'
 * form    'own' accepts only what `encode` writes, so accepted bytes re-encode to themselves; 'any' is for payloads
 *         of other makers' equipment
 */
export const decode = (bytes: Uint8Array, limits: Partial<ScanLimits> = {}, form: ScanForm = 'own'): unknown => {
  scanMessagePack(bytes, { ...DEFAULT_LIMITS, ...limits }, form);
  try {
    // A plain view of its own: the library hangs a property on the object it reads from, and answers a Buffer with Buffers.
    return unpackr.unpack(new Uint8Array(bytes.buffer, bytes.byteOffset, bytes.byteLength));
  } catch (cause) {
    throw new ProtocolError('decode', `MessagePack data of ${bytes.length} bytes passed the scan but not the decoder`, {
      cause,
    });
  }
};
