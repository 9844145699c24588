/**
 * Takes one reading out of an MQTT payload as the site file says: a bare number, or a value inside JSON or MessagePack.
 * Data of the plant's own equipment: whatever is in it, the result is a finite number or a refusal with a reason.
 */
import { decode } from './codec.ts';
import { ProtocolError } from './errors.ts';
import { parseInstant } from './instant.ts';
import { showValue } from './issue.ts';
import { MAX_PAYLOAD_BYTES } from './limits.ts';
import { resolvePointer } from './pointer.ts';
import type { PayloadReading } from './site.ts';

/** A reading as the payload gives it. */
export interface Reading {
  readonly value: number;
  /** Ms since 1970 UTC; null when the mapping names no time, so that arrival counts. */
  readonly timeMs: number | null;
}

/** Why a payload was refused, for counting; in `details.reason`. */
export type PayloadReason = 'size' | 'empty' | 'syntax' | 'absent' | 'value' | 'time';

const refuse = (reason: PayloadReason, what: string, cause?: unknown): never => {
  throw new ProtocolError('payload', `payload: ${what}`, { details: { reason }, cause });
};

const DECIMAL = /^[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?$/;
const LATEST_MS = 8.64e15;

const textOf = (payload: Uint8Array): string => {
  try {
    return new TextDecoder('utf-8', { fatal: true }).decode(payload);
  } catch (cause) {
    return refuse('syntax', 'expected text in UTF-8, got malformed bytes', cause);
  }
};

const numberFromText = (text: string, where: string): number => {
  const trimmed = text.trim();
  const value = DECIMAL.test(trimmed) ? Number(trimmed) : Number.NaN;
  if (Number.isFinite(value)) return value;
  const hint = /^[+-]?\d+,\d+$/.test(trimmed) ? '; write the decimal point as "."' : '';
  return refuse('value', `${where}expected a number, got ${showValue(trimmed)}${hint}`);
};

/** Numbers, true and false as 1 and 0 (common practice for switches), and decimal text. */
const numberFrom = (value: unknown, where: string): number => {
  if (typeof value === 'number' && Number.isFinite(value)) return value;
  if (typeof value === 'boolean') return value ? 1 : 0;
  if (typeof value === 'string') return numberFromText(value, where);
  if (value === undefined) return refuse('absent', `${where}expected a number, got nothing there`);
  return refuse('value', `${where}expected a number, got ${showValue(value)}`);
};

const timeFrom = (value: unknown, where: string): number => {
  const timeMs = typeof value === 'string' ? parseInstant(value) : value;
  if (typeof timeMs === 'number' && Math.abs(timeMs) <= LATEST_MS) return timeMs;
  const wanted = 'an ISO 8601 time with zone, or ms since 1970';
  return refuse('time', `${where}expected ${wanted}, got ${value === undefined ? 'nothing there' : showValue(value)}`);
};

const documentOf = (kind: 'json' | 'msgpack', payload: Uint8Array): unknown => {
  if (kind === 'json') {
    const text = textOf(payload);
    try {
      return JSON.parse(text);
    } catch (cause) {
      return refuse('syntax', `expected JSON text, got ${showValue(text)}`, cause);
    }
  }
  try {
    return decode(payload, { maxBytes: MAX_PAYLOAD_BYTES, maxDepth: 32 }, 'any');
  } catch (cause) {
    return refuse('syntax', `expected plain MessagePack; ${(cause as Error).message}`, cause);
  }
};

/**
 * Reads one value, and its time where the mapping names one.
 *
 * units   the value as it stands in the payload; timeMs ms since 1970 UTC, whole or not
 * throws  ProtocolError 'payload' with expected and got, and `details.reason` (PayloadReason) for counting
 * note    true and false count as 1 and 0, decimal text as its number; null, NaN and infinities are refused
 */
export const readPayload = (how: PayloadReading, payload: Uint8Array): Reading => {
  if (payload.length > MAX_PAYLOAD_BYTES) {
    refuse('size', `expected at most ${MAX_PAYLOAD_BYTES} bytes, got ${payload.length}`);
  }
  if (payload.length === 0) refuse('empty', 'expected a reading, got no bytes');
  if (how.kind === 'number') return { value: numberFromText(textOf(payload), ''), timeMs: null };
  const document = documentOf(how.kind, payload);
  const value = numberFrom(resolvePointer(document, how.value), `at "${how.value}": `);
  if (how.time === null) return { value, timeMs: null };
  return { value, timeMs: timeFrom(resolvePointer(document, how.time), `at "${how.time}": `) };
};
