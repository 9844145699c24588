/**
 * Bundles and candidates on disk. A sealed bundle (.swb) is an envelope around a document; a candidate (.swc) is the bare
 * document. Which one a file is shows in its first bytes, not in its name.
 */
import { createHash } from 'node:crypto';
import {
  type Bundle,
  bundleDigest,
  decodeBundle,
  ENVELOPE_MAGIC,
  type Envelope,
  ProtocolError,
  readEnvelope,
} from '@stillwell/protocol';
import { checkModel, type Model, modelFromBundle, runProbe } from '@stillwell/runtime/filter';
import { TrainError } from './errors.ts';
import { readBytesFile } from './key-file.ts';

/** A file's bundle document, and the envelope around it where there is one. */
export interface BundleFile {
  readonly bytes: Uint8Array;
  readonly envelope: Envelope | null;
}

/** A document decoded and dequantised. */
export interface OpenDocument {
  readonly document: Uint8Array;
  readonly bundle: Bundle;
  readonly model: Model;
  readonly digest: Uint8Array;
}

/**
 * Finds the document in a file's bytes.
 *
 * throws  ProtocolError of the envelope's layout, or 'digest' when the document is not the one the envelope states
 */
export function documentOf(content: Uint8Array, file: string): BundleFile {
  const isSealed = Buffer.from(content.subarray(0, 4)).toString('latin1') === ENVELOPE_MAGIC;
  if (!isSealed) return { bytes: Uint8Array.from(content), envelope: null };
  const envelope = readEnvelope(content);
  if (Buffer.compare(bundleDigest(envelope.document), envelope.digest) !== 0) {
    throw new ProtocolError(
      'digest',
      `${file}: the document does not have the SHA-256 that its envelope states; the file was altered or damaged, get it again`,
    );
  }
  return { bytes: envelope.document, envelope };
}

/**
 * Reads a bundle or candidate and everything in it that can be checked without a key: format, shapes, stability.
 *
 * throws  TrainError 'file' when it cannot be read; TrainError 'bundle' naming the file and what was found
 */
export function openBundleFile(path: string): OpenDocument & { readonly envelope: Envelope | null } {
  const content = readBytesFile(path, 'a bundle (.swb) or a candidate (.swc)');
  try {
    const { bytes, envelope } = documentOf(content, path);
    return { ...openDocument(bytes), envelope };
  } catch (cause) {
    throw new TrainError('bundle', refusalText(path, cause as Error), { cause });
  }
}

/** Bytes that are no MessagePack, or far too many, are another file or a damaged candidate: only its reader can tell. */
function refusalText(path: string, cause: Error): string {
  if (cause instanceof ProtocolError && ['scan', 'decode', 'size'].includes(cause.code)) {
    return (
      `${path}: expected a bundle (.swb) or a candidate (.swc), got bytes that are neither (${cause.message}); ` +
      'check that it is the right file, get it again, or fit again'
    );
  }
  return cause.message.startsWith(path) ? cause.message : `${path}: ${cause.message}`;
}

/**
 * Decodes and dequantises a document.
 *
 * throws  ProtocolError or FilterError
 */
export function openDocument(document: Uint8Array): OpenDocument {
  const bundle = decodeBundle(document);
  const model = modelFromBundle(bundle);
  checkModel(model);
  return { document, bundle, model, digest: bundleDigest(document) };
}

/** Replays the bundle's probe; null where every output has the stated bits, else one sentence on what differs. */
export function probeDifference({ bundle, model }: Pick<OpenDocument, 'bundle' | 'model'>): string | null {
  const { seed, ticks, digest, last } = bundle.probe;
  const run = runProbe(model, seed, ticks);
  const got = createHash('sha256').update(run.outputs).digest();
  if (Buffer.compare(got, digest) === 0) return null;
  const step = run.last.findIndex((value, i) => value !== last[i]);
  const where = step < 0 ? '' : `; step ${step + 1} of the last path: expected ${last[step]}, got ${run.last[step]}`;
  return `the probe's outputs differ from the stated ones (SHA-256 ${hex(digest).slice(0, 16)}…, got ${hex(got).slice(0, 16)}…)${where}`;
}

/**
 * As openBundleFile, and its probe must hold: for a model whose forecasts are to be scored.
 *
 * throws  as openBundleFile; TrainError 'bundle' where the probe comes out otherwise
 */
export function openProvenFile(path: string): ReturnType<typeof openBundleFile> {
  const opened = openBundleFile(path);
  const difference = probeDifference(opened);
  if (difference === null) return opened;
  throw new TrainError('bundle', `${path}: ${difference}; the file is damaged, get it again or fit again`);
}

/** Bytes as lower-case hex. */
export function hex(bytes: Uint8Array): string {
  return Buffer.from(bytes.buffer, bytes.byteOffset, bytes.byteLength).toString('hex');
}
