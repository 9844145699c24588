/**
 * Whether a sealed bundle may be trusted, cheapest question first: size, envelope, digest, signature, sequence, document,
 * site and class, schema, model, probe. One buffer is read, verified and decoded, so nothing can change in between. A
 * bundle that fails any of them is refused with its reason; refusing never throws.
 */
import { createHash } from 'node:crypto';
import {
  type Bundle,
  decodeBundle,
  describeSchemaDifference,
  openSealed,
  ProtocolError,
  type Site,
  type TrustedKeys,
} from '@stillwell/protocol';
import { checkModel, type Model, modelFromBundle, runProbe } from '@stillwell/runtime/filter';
import { RuntimeError } from '../errors.ts';
import type { CheckedBundle } from '../serving.ts';
import { type HighWater, standing } from './high-water.ts';

/** Which question a bundle failed. */
export type RefusalCode =
  | 'size'
  | 'envelope'
  | 'digest'
  | 'signature'
  | 'sequence'
  | 'format'
  | 'document'
  | 'site'
  | 'class'
  | 'schema'
  | 'model'
  | 'probe';

/** What came of the questions. */
export type Verdict =
  | { readonly ok: true; readonly checked: CheckedBundle }
  | { readonly ok: false; readonly code: RefusalCode; readonly reason: string };

/** What a bundle is held against. */
export interface LoadContext {
  readonly site: Site;
  readonly trusted: TrustedKeys;
  readonly highWater: HighWater;
  /** For what stands in our own slots: the sequence may be the mark itself, or below it after a fall-back. */
  readonly isOwn: boolean;
}

/** Judges the bytes of a sealed bundle. */
export function checkBundle(sealed: Uint8Array, context: LoadContext): Verdict {
  try {
    const { document, digest, epoch, sequence } = openSealed(sealed, context.trusted);
    if (!context.isOwn) {
      const where = standing(context.highWater, epoch, sequence);
      if (where !== 'above') return refuse('sequence', sequenceReason(context.highWater, epoch, sequence));
    }
    const bundle = decodeBundle(document);
    const mismatch = checkScope(bundle, context.site);
    if (mismatch !== null) return mismatch;
    const model = modelFromBundle(bundle);
    checkModel(model);
    const probe = checkProbe(bundle, model);
    if (probe !== null) return refuse('probe', probe);
    return { ok: true, checked: { bundle, model, digest, epoch, sequence, bytes: sealed.length } };
  } catch (error) {
    return refuse(codeOf(error), error instanceof Error ? error.message : String(error));
  }
}

/**
 * Checks a bundle file that a person named, before anything is made or changed for it: all but its place in the sequence,
 * which the data folder knows.
 *
 * throws  RuntimeError 'bundle' naming the file, which question it failed and why
 */
export function checkNamed(path: string, sealed: Uint8Array, site: Site, trusted: TrustedKeys): CheckedBundle {
  const verdict = checkBundle(sealed, { site, trusted, highWater: [], isOwn: false });
  if (verdict.ok) return verdict.checked;
  throw new RuntimeError('bundle', `${path}: refused (${verdict.code}): ${verdict.reason}`);
}

/**
 * Which of several sites a bundle file is for: the place in the list.
 *
 * throws  RuntimeError 'bundle' where it is for none of them
 */
export function siteOfBundle(
  path: string,
  sealed: Uint8Array,
  places: readonly { readonly site: Site; readonly trusted: TrustedKeys }[],
): number {
  const verdicts = places.map(({ site, trusted }) =>
    checkBundle(sealed, { site, trusted, highWater: [], isOwn: false }),
  );
  // Whatever else may be wrong with it is said when it is checked for that site.
  const at = verdicts.findIndex((verdict) => verdict.ok || verdict.code !== 'site');
  if (at >= 0 || places.length === 1) return Math.max(0, at);
  const names = places.map(({ site }) => site.site).join(', ');
  const why = verdicts.map((verdict) => (verdict.ok ? '' : verdict.reason))[0]!.split(',')[0];
  throw new RuntimeError('bundle', `${path}: ${why}; expected one for ${names}`);
}

function refuse(code: RefusalCode, reason: string): { ok: false; code: RefusalCode; reason: string } {
  return { ok: false, code, reason };
}

function checkScope(bundle: Bundle, site: Site): { ok: false; code: RefusalCode; reason: string } | null {
  if (bundle.site !== site.site) return refuse('site', `bundle for site "${bundle.site}", this is "${site.site}"`);
  if (bundle.equipmentClass !== site.equipmentClass)
    return refuse('class', `bundle for class "${bundle.equipmentClass}", this site is "${site.equipmentClass}"`);
  const difference = describeSchemaDifference(bundle, site);
  return difference === null ? null : refuse('schema', difference);
}

/** The bundle's own short run must come out the same to the last bit on this machine. */
function checkProbe(bundle: Bundle, model: Model): string | null {
  const { seed, ticks, digest } = bundle.probe;
  const got = createHash('sha256')
    .update(runProbe(model, seed, ticks).outputs)
    .digest();
  if (Buffer.compare(got, digest) === 0) return null;
  const hex = (bytes: Uint8Array): string => Buffer.from(bytes).toString('hex').slice(0, 16);
  return `probe of ${ticks} ticks: expected ${hex(digest)}…, this machine computes ${hex(got)}…`;
}

function sequenceReason(highWater: HighWater, epoch: number, sequence: number): string {
  const newest = highWater[highWater.length - 1]!;
  if (epoch < newest.epoch) return `key epoch ${epoch} is over, this gateway is at epoch ${newest.epoch}`;
  return (
    `sequence ${sequence} of key epoch ${epoch}: this gateway has seen ${newest.sequence}; ` +
    'to go back to an older model seal it again under a higher number'
  );
}

const PROTOCOL_CODES: Readonly<Record<string, RefusalCode>> = {
  size: 'size',
  envelope: 'envelope',
  digest: 'digest',
  signature: 'signature',
  format: 'format',
};

function codeOf(error: unknown): RefusalCode {
  if (error instanceof ProtocolError) return PROTOCOL_CODES[error.code] ?? 'document';
  return 'model';
}
