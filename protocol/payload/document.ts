/** From bytes to what a payload holds: text, JSON or MessagePack. Whatever the bytes are, nothing throws past here. */
import { decode } from '../codec.ts';
import { showValue } from '../issue.ts';
import { MAX_PAYLOAD_BYTES } from '../limits.ts';
import { isDecimal } from './decimal.ts';
import type { PayloadReason } from './refusal.ts';

/** How a payload is written. */
export type PayloadForm = 'number' | 'json' | 'msgpack';

/** A payload that is nothing of its form. */
export class BadPayload {
  readonly reason: PayloadReason;
  /** See `refusalText`. */
  readonly got: unknown;

  constructor(reason: PayloadReason, got: unknown) {
    this.reason = reason;
    this.got = got;
  }
}

const MSGPACK_LIMITS = { maxBytes: MAX_PAYLOAD_BYTES, maxDepth: 32 };
/** A byte order mark goes, as everywhere in text. */
const utf8 = new TextDecoder('utf-8', { fatal: true });

/** Most bare numbers are a few plain characters: longer ones go the long way, as does everything that is no number. */
const PLAIN_BYTES = 32;

const plainNumber = (payload: Uint8Array): number => {
  if (payload.length > PLAIN_BYTES) return Number.NaN;
  let text = '';
  for (let i = 0; i < payload.length; i++) text += String.fromCharCode(payload[i]!);
  return isDecimal(text) ? Number(text) : Number.NaN;
};

const textOf = (payload: Uint8Array): string | BadPayload => {
  try {
    return utf8.decode(payload);
  } catch {
    return new BadPayload('syntax', 'expected text in UTF-8, got malformed bytes');
  }
};

/** The document of a payload; of a bare number it, or where it is none, the text. */
export const readDocument = (form: PayloadForm, payload: Uint8Array): unknown => {
  if (payload.length > MAX_PAYLOAD_BYTES) return new BadPayload('size', payload.length);
  if (payload.length === 0) return new BadPayload('empty', undefined);
  if (form === 'msgpack') {
    try {
      return decode(payload, MSGPACK_LIMITS, 'any');
    } catch (error) {
      return new BadPayload('syntax', `expected plain MessagePack; ${(error as Error).message}`);
    }
  }
  const number = form === 'number' ? plainNumber(payload) : Number.NaN;
  if (Number.isFinite(number)) return number;
  const text = textOf(payload);
  if (form === 'number' || text instanceof BadPayload) return text;
  try {
    return JSON.parse(text);
  } catch {
    return new BadPayload('syntax', `expected JSON text, got ${showValue(text)}`);
  }
};
