/**
 * From a candidate to a sealed bundle. What is signed here is believed by every gateway, so all that a gateway checks is
 * checked before signing: format, shapes, stability, the probe to the bit; and beyond it, that the judge found skill.
 */
import {
  decodeBundle,
  encodeBundle,
  type KeyPair,
  openSealed,
  publicHalf,
  type SealNumbers,
  sealBundle,
  TARGET_BUNDLE_BYTES,
} from '@stillwell/protocol';
import { hex, type OpenDocument, openDocument, probeDifference } from './bundle-file.ts';
import { TrainError } from './errors.ts';

/** Numbers of the seal, and what a person allows. */
export interface SealOptions extends SealNumbers {
  /** Why a person seals without skill; stands in the document afterwards. Null: do not. */
  readonly override: string | null;
  /** Largest sealed bundle in bytes; default 24 KiB, so that it fits one MQTT message anywhere. */
  readonly maxBytes?: number;
}

/** A sealed bundle and what is in it. */
export interface SealedCandidate extends OpenDocument {
  readonly sealed: Uint8Array;
}

/**
 * Checks and seals one candidate; `where` names it in refusals.
 *
 * throws  TrainError 'bundle' when it fails a check, 'no-skill' when the judge found none and no reason is given
 */
export function sealCandidate(
  candidate: OpenDocument,
  key: KeyPair,
  options: SealOptions,
  where: string,
): SealedCandidate {
  const opened = withOverride(candidate, options.override, where);
  const difference = probeDifference(opened);
  if (difference !== null) {
    throw new TrainError('bundle', `${where}: ${difference}; fit it again with this version before sealing`);
  }
  const sealed = sealBundle(opened.document, { epoch: options.epoch, sequence: options.sequence }, [key]);
  const { maxBytes = TARGET_BUNDLE_BYTES } = options;
  if (sealed.length > maxBytes) {
    throw new TrainError(
      'bundle',
      `${where}: sealed it has ${sealed.length} bytes, expected at most ${maxBytes}; fit a smaller one (--max-bytes of ` +
        '`stillwell fit`), or allow more with --max-bytes here where broker and link take it',
    );
  }
  // What a gateway will do first, done once here: a bundle that cannot be opened must not leave the desk.
  openSealed(sealed, [publicHalf(key)]);
  return { ...opened, sealed };
}

function withOverride(candidate: OpenDocument, override: string | null, where: string): OpenDocument {
  const { judge } = candidate.bundle;
  if (judge.hasSkill || judge.override !== null) return candidate;
  if (override === null) {
    throw new TrainError(
      'no-skill',
      `${where}: the judge found no skill over the obvious forecasts, so it is not sealed ` +
        `(${(judge.verdicts[0] ?? 'no verdict').replace(/\.$/, '')}); gather more history or more inputs, or seal it all the same with ` +
        '--override "reason", which then stands in the bundle',
    );
  }
  if (override.trim().length < 3) {
    throw new TrainError('options', `--override: expected a reason in words, got ${JSON.stringify(override)}`);
  }
  const document = encodeBundle({ ...candidate.bundle, judge: { ...judge, override: override.trim() } });
  decodeBundle(document);
  return openDocument(document);
}

/**
 * The number for the next bundle of a site: one above the bundle it follows, 1 without one.
 *
 * throws  TrainError 'options' when an older or equal number is asked for, or another epoch's bundle lies below it
 */
export function nextNumbers(
  asked: { readonly sequence: number | null; readonly epoch: number | null },
  after: (SealNumbers & { readonly file: string; readonly digest: Uint8Array }) | null,
): SealNumbers {
  const epoch = asked.epoch ?? after?.epoch ?? 1;
  const isSameEpoch = after !== null && after.epoch === epoch;
  const sequence = asked.sequence ?? (isSameEpoch ? after.sequence + 1 : 1);
  if (after !== null && epoch < after.epoch) {
    throw new TrainError(
      'options',
      `--epoch ${epoch}: expected at least ${after.epoch}, the key epoch of ${after.file}; gateways refuse an older one`,
    );
  }
  if (isSameEpoch && sequence <= after.sequence) {
    throw new TrainError(
      'options',
      `--sequence ${sequence}: expected more than ${after.sequence}, the number of ${after.file} ` +
        `(${hex(after.digest).slice(0, 16)}…); gateways refuse what is not above the last one`,
    );
  }
  return { epoch, sequence };
}
