/**
 * A bundle to bytes and back. The bytes are what is sealed: the same bundle always gives the same bytes, and bytes that
 * are accepted encode to themselves again.
 */
import type { Bundle } from './bundle.ts';
import { checkBundle } from './bundle-check.ts';
import { type BundleDocument, bundleSchema } from './bundle-schema.ts';
import { fromColumns, toColumns } from './channel-columns.ts';
import { decode, encode } from './codec.ts';
import { sha256 } from './digest.ts';
import { ProtocolError } from './errors.ts';
import { deepFreeze } from './freeze.ts';
import { formatFault, listFaults, showValue } from './issue.ts';
import { MAX_BUNDLE_BYTES } from './limits.ts';
import { formatPath } from './path.ts';
import { ARITHMETIC, BUNDLE_FORMAT } from './version.ts';

const fieldsAt = (path: readonly PropertyKey[]): readonly string[] =>
  path.length === 0 ? Object.keys(bundleSchema.shape) : [];

const checkedDocument = (value: unknown): BundleDocument => {
  // A program reads few bundles: to have a parser compiled for them takes longer than it saves.
  const parsed = bundleSchema.safeParse(value, { jitless: true });
  if (parsed.success) return parsed.data;
  const fault = listFaults(parsed.error, value, fieldsAt)[0]!;
  const details = { path: formatPath(fault.path) };
  throw new ProtocolError('schema', `bundle document: ${formatFault(fault)}`, { details });
};

const toBundle = (document: BundleDocument): Bundle => {
  const bundle = { ...document, channels: fromColumns(document.channels) };
  checkBundle(bundle);
  return bundle;
};

/** Numbers are looked at before the schema: another format has other fields, and its number is the better message. */
const checkNumbers = (value: unknown): void => {
  const fields = typeof value === 'object' && value !== null ? (value as Record<string, unknown>) : {};
  const known = { format: BUNDLE_FORMAT, arithmetic: ARITHMETIC };
  for (const [field, expected] of Object.entries(known)) {
    if (fields[field] === expected) continue;
    throw new ProtocolError(
      'format',
      `bundle document: ${field}: this program reads ${expected}, got ${showValue(fields[field])}; use a program that reads it, or fit again`,
      { details: { field, expected, got: fields[field] } },
    );
  }
};

/**
 * Writes a bundle document, after the same checks that reading makes.
 *
 * throws  ProtocolError 'format', 'schema' or 'tensor' if the bundle contradicts itself; 'size' past MAX_BUNDLE_BYTES
 */
export const encodeBundle = (bundle: Bundle): Uint8Array => {
  checkNumbers(bundle);
  const fields = checkedDocument({ ...bundle, channels: toColumns(bundle.channels) });
  toBundle(fields);
  const document = encode(fields);
  if (document.length > MAX_BUNDLE_BYTES) {
    throw new ProtocolError(
      'size',
      `bundle document: expected at most ${MAX_BUNDLE_BYTES} bytes, got ${document.length}`,
      {
        details: { bytes: document.length, maxBytes: MAX_BUNDLE_BYTES },
      },
    );
  }
  return document;
};

/**
 * Reads a bundle document. Only for bytes that `openSealed` let through, or that were made on this machine.
 *
 * throws  ProtocolError 'size', 'scan', 'decode', 'format', 'schema' or 'tensor'
 */
export const decodeBundle = (document: Uint8Array): Bundle => {
  const value = decode(document, { maxBytes: MAX_BUNDLE_BYTES });
  checkNumbers(value);
  return deepFreeze(toBundle(checkedDocument(value)));
};

/** The name of a bundle everywhere: SHA-256 of its document, whatever envelope it travels in; 32 bytes. */
export const bundleDigest = (document: Uint8Array): Uint8Array => sha256(document);
