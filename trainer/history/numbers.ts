/**
 * Numbers straight from a file's bytes: no string is made for the usual plain decimal, which is most of the time saved in
 * a long history. Exact: at most 15 digits and 22 decimals give both factors exactly, so that one division rounds once
 * (Clinger 1990, "How to read floating point numbers accurately", the fast path); all else goes through Number().
 */

const POWERS: readonly number[] = Array.from({ length: 23 }, (_, k) => Number(`1e${k}`));
/** Words that loggers write for "no reading"; compared without case. */
const MISSING = new Set(['na', 'n/a', 'nan', 'null', '-']);
/** A decimal number as RFC 8259 and spreadsheets write it, a leading + or missing leading 0 allowed. */
const DECIMAL = /^[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?$/;

/** True for the words that stand for a missing reading, and for nothing at all. */
export function isMissingMark(text: string): boolean {
  return text === '' || MISSING.has(text.toLowerCase());
}

/** Number of a whole text: NaN for a missing mark, Infinity for anything that is not a finite number. */
export function numberOfText(text: string): number {
  const trimmed = text.trim();
  if (DECIMAL.test(trimmed)) return Number(trimmed);
  return isMissingMark(trimmed) ? Number.NaN : Number.POSITIVE_INFINITY;
}

/**
 * Reads bytes[from, to) as a number.
 *
 * returns  the number; NaN where the field marks a missing reading; ±Infinity where it is no finite number
 */
export function numberOfBytes(bytes: Uint8Array, from: number, to: number): number {
  let at = from;
  let isNegative = false;
  if (bytes[at] === 45) {
    isNegative = true;
    at++;
  }
  let mantissa = 0;
  let digits = 0;
  let decimals = -1;
  for (; at < to; at++) {
    const byte = bytes[at] as number;
    if (byte >= 48 && byte <= 57) {
      mantissa = mantissa * 10 + (byte - 48);
      if (mantissa > 0) digits++;
      if (decimals >= 0) decimals++;
    } else if (byte === 46 && decimals < 0) decimals = 0;
    else break;
  }
  const hasDigits = at - from > (isNegative ? 1 : 0) + (decimals >= 0 ? 1 : 0);
  if (at < to || !hasDigits || digits > 15 || decimals > 22) return numberOfText(textOfBytes(bytes, from, to));
  const value = decimals > 0 ? mantissa / (POWERS[decimals] as number) : mantissa;
  return isNegative ? -value : value;
}

/** Bytes as text, for messages and the rare fields that need a string. */
export function textOfBytes(bytes: Uint8Array, from: number, to: number): string {
  return Buffer.from(bytes.buffer, bytes.byteOffset + from, to - from).toString('utf8');
}
