/** Why a payload gave no reading: a word for counting, and a sentence for people. */
import { showValue } from '../issue.ts';
import { MAX_PAYLOAD_BYTES } from '../limits.ts';

/** Why a payload was refused, for counting. */
export type PayloadReason =
  | 'size'
  | 'empty'
  | 'syntax'
  | 'absent'
  | 'value'
  | 'time'
  /** Its sender says that it is not good. */
  | 'quality'
  /** Data of a Sparkplug node or device whose birth was not heard. */
  | 'unborn';

const EXPECTED: Readonly<Record<PayloadReason, string>> = {
  size: `at most ${MAX_PAYLOAD_BYTES} bytes`,
  empty: 'a reading',
  syntax: 'a readable payload',
  absent: 'a number',
  value: 'a number',
  time: 'an ISO 8601 time with zone, or ms since 1970',
  quality: 'good quality',
  unborn: 'data after a birth that names it',
};

const shown = (reason: PayloadReason, got: unknown): string => {
  if (reason === 'size') return String(got);
  if (reason === 'empty') return 'no bytes';
  if (reason === 'syntax' && typeof got === 'string') return got;
  return got === undefined ? 'nothing there' : showValue(typeof got === 'string' ? got.trim() : got);
};

/**
 * "payload: at "/value": expected a number, got "closed"".
 *
 * at   pointer or metric; '' for a bare payload
 * got  what stood there; for 'syntax' the words to say
 */
export const refusalText = (reason: PayloadReason, at: string, got: unknown): string => {
  const where = at === '' ? '' : `at ${JSON.stringify(at)}: `;
  const isComma = reason === 'value' && typeof got === 'string' && /^[+-]?\d+,\d+$/.test(got.trim());
  const hint = isComma ? '; write the decimal point as "."' : '';
  if (reason === 'syntax') return `payload: ${where}${shown(reason, got)}`;
  return `payload: ${where}expected ${EXPECTED[reason]}, got ${shown(reason, got)}${hint}`;
};
