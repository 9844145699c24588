/** Picks a reading out of a document: value, and where the site file names them, time and quality. */
import { parseInstant } from '../instant.ts';
import { pointerTokens, resolveTokens } from '../pointer.ts';
import { isDecimal } from './decimal.ts';
import { type GoodRule, type GoodTest, goodTest } from './good.ts';
import type { PayloadReason } from './refusal.ts';

/** Where in a document a reading stands; pointers are RFC 6901. */
export interface PickRule {
  readonly value: string;
  readonly time: string | null;
  readonly quality: string | null;
  readonly good: GoodRule;
}

/** What was picked last; one object serves for every message. */
export interface Picked {
  value: number;
  /** Ms since 1970 UTC; NaN where the rule names no time, so that arrival counts. */
  timeMs: number;
  /** After a refusal: the pointer, and what stood there. */
  at: string;
  got: unknown;
}

const LATEST_MS = 8.64e15;

/** Signals of one message mostly share its time: the text read last, and what it was. */
let lastInstant = '';
let lastInstantMs: number | null = null;

const instantOf = (text: string): number | null => {
  if (text !== lastInstant) {
    lastInstant = text;
    lastInstantMs = parseInstant(text);
  }
  return lastInstantMs;
};

/** Numbers, true and false as 1 and 0 (common practice for switches), and decimal text; NaN for anything else. */
export const numberFrom = (value: unknown): number => {
  if (typeof value === 'number') return value;
  if (typeof value === 'boolean') return value ? 1 : 0;
  if (typeof value !== 'string') return Number.NaN;
  const trimmed = value.trim();
  return isDecimal(trimmed) ? Number(trimmed) : Number.NaN;
};

/** A rule made ready. */
export class Picker {
  readonly #rule: PickRule;
  readonly #value: readonly string[];
  readonly #time: readonly string[] | null;
  readonly #quality: readonly string[] | null;
  readonly #isGood: GoodTest;

  constructor(rule: PickRule) {
    const tokens = (pointer: string | null) => (pointer === null ? null : pointerTokens(pointer));
    this.#rule = rule;
    this.#value = pointerTokens(rule.value);
    this.#time = tokens(rule.time);
    this.#quality = tokens(rule.quality);
    this.#isGood = goodTest(rule.good);
  }

  /** Fills `into`; the reason of a refusal, else null. A value of bad quality is not looked at: often it is none. */
  pick(document: unknown, into: Picked): PayloadReason | null {
    if (this.#quality !== null) {
      const quality = resolveTokens(document, this.#quality);
      if (!this.#isGood(quality)) return refuse(into, 'quality', this.#rule.quality!, quality);
    }
    const raw = resolveTokens(document, this.#value);
    into.value = numberFrom(raw);
    if (!Number.isFinite(into.value))
      return refuse(into, raw === undefined ? 'absent' : 'value', this.#rule.value, raw);
    into.timeMs = Number.NaN;
    if (this.#time === null) return null;
    const time = resolveTokens(document, this.#time);
    const timeMs = typeof time === 'string' ? instantOf(time) : time;
    if (typeof timeMs !== 'number' || !(Math.abs(timeMs) <= LATEST_MS))
      return refuse(into, 'time', this.#rule.time!, time);
    into.timeMs = timeMs;
    return null;
  }
}

const refuse = (into: Picked, reason: PayloadReason, at: string, got: unknown): PayloadReason => {
  into.at = at;
  into.got = got;
  return reason;
};
