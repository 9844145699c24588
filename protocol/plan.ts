/**
 * A plan: an input's values ahead of now, as whoever plans them publishes it on the input's plan topic. JSON or
 * MessagePack, told apart by the first byte: either `start`, `step` and `values`, or `points` of time and value (which may
 * also stand alone, as a list), each value holding until the next, as commands do. Data of others: whatever is in it, the
 * result is a plan or one refusal.
 */
import { z } from 'zod';
import { decode } from './codec.ts';
import { formatDuration, parseDuration } from './duration.ts';
import { ProtocolError } from './errors.ts';
import { deepFreeze } from './freeze.ts';
import { formatInstant, parseInstant } from './instant.ts';
import { formatFault, listFaults, showValue } from './issue.ts';
import { MAX_PAYLOAD_BYTES, MAX_PLAN_AHEAD_MS, MAX_PLAN_SPAN_MS, MAX_PLAN_VALUES } from './limits.ts';

const EARLIEST_MS = 0;
/** The last moment of year 9999, the last that can be written. */
const LATEST_MS = 253_402_300_799_999;

/** A value read by hand, so that the refusal says what would have been right. `read` gives undefined to refuse. */
const checked = <T>(expected: string, read: (value: unknown) => T | undefined) =>
  z.unknown().transform((value, context): T => {
    const result = value === undefined ? undefined : read(value);
    if (result !== undefined) return result;
    const hint = typeof value === 'number' && value > 0 && value < 1e10 ? SECONDS_HINT : '';
    context.addIssue({ code: 'custom', message: `expected ${expected}, got ${showValue(value)}${hint}` });
    return z.NEVER;
  });

/** Said of a number that would be early 1970. */
const SECONDS_HINT = ' (seconds since 1970? write milliseconds)';

const time = checked('a time such as "2026-03-01T12:00:00Z", or ms since 1970', (value) => {
  const ms = typeof value === 'string' ? parseInstant(value) : value;
  // Numbers below 1e10 are April 1970 in ms and the present in seconds: never what a plan means.
  const isMeant = typeof value === 'string' || (typeof ms === 'number' && ms >= 1e10);
  return typeof ms === 'number' && isMeant && ms >= EARLIEST_MS && ms <= LATEST_MS ? ms : undefined;
});

const step = z.unknown().transform((value, context): number => {
  const ms = typeof value === 'string' ? parseDuration(value) : typeof value === 'number' ? value * 1000 : null;
  if (ms !== null && Number.isFinite(ms) && ms > 0) return ms;
  const message = `expected a duration such as "15min", or seconds above 0, got ${showValue(value)}`;
  context.addIssue({ code: 'custom', message });
  return z.NEVER;
});

const value = z.unknown().transform((given, context): number => {
  if (typeof given === 'number' && Number.isFinite(given)) return given;
  if (typeof given === 'boolean') return given ? 1 : 0;
  context.addIssue({ code: 'custom', message: `expected a number, true or false, got ${showValue(given)}` });
  return z.NEVER;
});

/** One point of a plan. */
export const planPointSchema = z.strictObject({ time, value });

/** Every field of a plan message. */
export const planSchema = z.strictObject({
  issued_at: time.optional(),
  start: time.optional(),
  step: step.optional(),
  values: z.array(value).min(1).optional(),
  points: z.array(planPointSchema).min(1).optional(),
  end: time.optional(),
});

type PlanFields = z.output<typeof planSchema>;

/** Why a plan was refused, for counting; in `details.reason`. */
export type PlanReason = 'size' | 'syntax' | 'fields' | 'order' | 'range' | 'past' | 'far' | 'long';

/** An input's values ahead: value k holds from time k to time k + 1, the last one to the end. */
export interface Plan {
  /** (n) ms since 1970, rising. */
  readonly timesMs: readonly number[];
  /** (n) in the input's unit. */
  readonly values: readonly number[];
  readonly endMs: number;
  /** When it was made, by its own word; null where it says nothing. */
  readonly issuedAtMs: number | null;
}

/** What a plan is held against. */
export interface PlanRules {
  readonly tickMs: number;
  /** Furthest forecast step, in ticks. */
  readonly horizon: number;
  /** Physically possible values of the input; null: any. */
  readonly range: readonly [number, number] | null;
  /** The present moment; null: not known, so that nothing is too far off. */
  readonly nowMs: number | null;
}

const refuse = (reason: PlanReason, what: string, cause?: unknown): never => {
  throw new ProtocolError('plan', `plan: ${what}`, { details: { reason }, cause });
};

/** First bytes of a MessagePack map or list; as JSON they would be malformed text. */
const isPacked = (first: number): boolean => first >= 0x80;

const documentOf = (payload: Uint8Array): unknown => {
  if (payload.length > MAX_PAYLOAD_BYTES)
    refuse('size', `expected at most ${MAX_PAYLOAD_BYTES} bytes, got ${payload.length}`);
  if (payload.length === 0) refuse('syntax', 'expected JSON or MessagePack, got no bytes');
  const isMark = payload[0] === 0xef && payload[1] === 0xbb && payload[2] === 0xbf;
  if (isPacked(payload[0]!) && !isMark) {
    try {
      return decode(payload, { maxBytes: MAX_PAYLOAD_BYTES, maxDepth: 4 }, 'any');
    } catch (cause) {
      return refuse('syntax', `expected plain MessagePack; ${(cause as Error).message}`, cause);
    }
  }
  let text = '';
  try {
    text = new TextDecoder('utf-8', { fatal: true }).decode(payload);
    return JSON.parse(text);
  } catch (cause) {
    const got = text === '' ? 'malformed bytes' : showValue(text);
    return refuse('syntax', `expected JSON or MessagePack, got ${got}`, cause);
  }
};

const fieldsAt = (path: readonly PropertyKey[]): readonly string[] =>
  Object.keys(path.length === 0 ? planSchema.shape : planPointSchema.shape);

const fieldsOf = (document: unknown): PlanFields => {
  const map = Array.isArray(document) ? { points: document } : document;
  const lists = typeof map === 'object' && map !== null ? (map as Record<string, unknown>) : {};
  for (const key of ['values', 'points']) {
    const list = lists[key];
    if (Array.isArray(list) && list.length > MAX_PLAN_VALUES)
      refuse('long', `${key}: expected at most ${MAX_PLAN_VALUES}, got ${list.length}`);
  }
  const parsed = planSchema.safeParse(map);
  if (parsed.success) return parsed.data;
  return refuse('fields', formatFault(listFaults(parsed.error, map, fieldsAt)[0]!));
};

/** The series a message stands for, whichever of its two forms it has. */
const seriesOf = (fields: PlanFields, tickMs: number): Plan => {
  const { start, step: stepMs, values, points, end } = fields;
  const issuedAtMs = fields.issued_at ?? null;
  if (points !== undefined) {
    const strange = (['start', 'step', 'values'] as const).find((key) => fields[key] !== undefined);
    if (strange !== undefined)
      refuse('fields', `expected either points, or start, step and values, got points and ${strange}`);
    const timesMs = points.map((point) => point.time);
    const at = timesMs.findIndex((ms, i) => i > 0 && ms <= timesMs[i - 1]!);
    if (at > 0)
      refuse('order', `points[${at}].time: expected a time after ${told(timesMs[at - 1]!)}, got ${told(timesMs[at]!)}`);
    const endMs = end ?? timesMs.at(-1)! + tickMs;
    return { timesMs, values: points.map((point) => point.value), endMs, issuedAtMs };
  }
  if (start === undefined || stepMs === undefined || values === undefined) {
    const missing = (['start', 'step', 'values'] as const).filter((key) => fields[key] === undefined);
    return refuse('fields', `expected points, or start, step and values, got no ${missing.join(' and no ')}`);
  }
  const timesMs = values.map((_, k) => start + k * stepMs);
  return { timesMs, values, endMs: end ?? start + values.length * stepMs, issuedAtMs };
};

const told = (ms: number): string => (ms <= LATEST_MS ? formatInstant(ms) : `${ms} ms`);

const checkTimes = ({ timesMs, endMs }: Plan, rules: PlanRules): void => {
  const [startMs, lastMs] = [timesMs[0]!, timesMs.at(-1)!];
  if (endMs <= lastMs)
    refuse('order', `end: expected a time after the last value's, ${told(lastMs)}, got ${told(endMs)}`);
  const mostSpanMs = Math.max(MAX_PLAN_SPAN_MS, rules.horizon * rules.tickMs);
  if (endMs - startMs > mostSpanMs)
    refuse(
      'long',
      `expected at most ${formatDuration(mostSpanMs)} from start to end, got ${told(startMs)} to ${told(endMs)}`,
    );
  if (rules.nowMs === null) return;
  if (endMs <= rules.nowMs)
    refuse('past', `expected values ahead of ${told(rules.nowMs)}, got an end at ${told(endMs)}`);
  const mostAheadMs = Math.max(MAX_PLAN_AHEAD_MS, rules.horizon * rules.tickMs);
  if (startMs > rules.nowMs + mostAheadMs)
    refuse(
      'far',
      `expected a start within ${formatDuration(mostAheadMs)} of ${told(rules.nowMs)}, got ${told(startMs)}`,
    );
};

/**
 * Reads a plan message.
 *
 * shapes  one value to MAX_PLAN_VALUES
 * units   values in the input's unit, true and false as 1 and 0; times RFC 3339 with zone or ms since 1970
 * throws  ProtocolError 'plan' with expected and got, and `details.reason` (PlanReason) for counting
 * note    points without an end reach to one tick after the last: a value told once is not told for ever
 */
export const parsePlan = (payload: Uint8Array, rules: PlanRules): Plan => readPlan(documentOf(payload), rules);

/** The same of what a payload holds; throws as parsePlan, but for size and syntax. */
export const readPlan = (document: unknown, rules: PlanRules): Plan => {
  const plan = seriesOf(fieldsOf(document), rules.tickMs);
  checkTimes(plan, rules);
  if (rules.range !== null) {
    const [low, high] = rules.range;
    const at = plan.values.findIndex((one) => one < low || one > high);
    if (at >= 0)
      refuse('range', `value ${at + 1}: expected ${low} to ${high}, the input's range, got ${plan.values[at]}`);
  }
  return deepFreeze(plan);
};
