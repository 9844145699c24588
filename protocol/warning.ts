/**
 * The warning message of one signal: which of its limits will probably be crossed, how probably, and when. Retained JSON,
 * one topic a signal: whoever comes late gets in one message all that is open, and never one limit's news beside another
 * limit's yesterday. Advice for people, no alarm: nobody is asked to act on it alone.
 */
import { z } from 'zod';
import { ProtocolError } from './errors.ts';
import { LIMIT_NAMES, type LimitName } from './forecast.ts';
import { formatInstant } from './instant.ts';
import { headFields, instantSchema, type MessageHead, nameSchema, readJson, writeHead, writeJson } from './message.ts';

/** opened: first word; updated: still open; closed: no longer probable; expired: nothing can be said any more. */
export const WARNING_STATUSES = ['opened', 'updated', 'closed', 'expired'] as const;
/** One of them. */
export type WarningStatus = (typeof WARNING_STATUSES)[number];

/** One limit's warning. */
export const limitWarningSchema = z.strictObject({
  limit: z.enum(LIMIT_NAMES),
  side: z.enum(['above', 'below']),
  value: z.number(),
  status: z.enum(WARNING_STATUSES),
  since: instantSchema,
  probability: z.number().min(0).max(1),
  earliest: instantSchema.nullable(),
  likely: instantSchema.nullable(),
  latest: instantSchema.nullable(),
  crossed_at: instantSchema.nullable(),
  reason: z.string().min(1).optional(),
});

/** Every field of a warning message. */
export const warningSchema = z.strictObject({
  ...headFields('warning'),
  signal: nameSchema,
  unit: z.string().min(1),
  origin: instantSchema,
  tick_s: z.number().positive(),
  horizon: z.int().min(1),
  open: z.int().min(0).max(LIMIT_NAMES.length),
  warnings: z.array(limitWarningSchema).min(1).max(LIMIT_NAMES.length),
});

/** A warning message as it stands in JSON. */
export type WarningMessage = z.output<typeof warningSchema>;

/** One limit's warning. */
export interface LimitWarning {
  readonly limit: LimitName;
  readonly side: 'above' | 'below';
  /** The limit, in the signal's unit. */
  readonly value: number;
  readonly status: WarningStatus;
  /** Origin of the forecast that opened it. */
  readonly sinceMs: number;
  /** Of crossing within the horizon; of a warning that expired, as it was said last. */
  readonly probability: number;
  /** When it is crossed, if it is within the horizon: the bounds' lower end, the middle, the upper end; null: not known. */
  readonly earliestMs: number | null;
  readonly likelyMs: number | null;
  readonly latestMs: number | null;
  /** Tick of the first reading past the limit since it opened; null: none yet. */
  readonly crossedMs: number | null;
  /** Why, of one that expired. */
  readonly reason: string | null;
}

/** What a warning message is made of, beside the head. */
export interface WarningFacts extends MessageHead {
  readonly signal: string;
  readonly unit: string;
  /** Label of the last tick folded in. */
  readonly originMs: number;
  readonly tickMs: number;
  /** How many ticks ahead were looked at. */
  readonly horizon: number;
  readonly warnings: readonly LimitWarning[];
}

const instantOrNull = (ms: number | null): string | null => (ms === null ? null : formatInstant(ms));

const isOpen = (status: WarningStatus): boolean => status === 'opened' || status === 'updated';

const limitFields = (warning: LimitWarning): z.output<typeof limitWarningSchema> => ({
  limit: warning.limit,
  side: warning.side,
  value: warning.value,
  status: warning.status,
  since: formatInstant(warning.sinceMs),
  probability: warning.probability,
  earliest: instantOrNull(warning.earliestMs),
  likely: instantOrNull(warning.likelyMs),
  latest: instantOrNull(warning.latestMs),
  crossed_at: instantOrNull(warning.crossedMs),
  ...(warning.reason === null ? {} : { reason: warning.reason }),
});

/** Refuses a count that is not that of the list, a limit told of twice, and times out of order. */
const checkList = (message: WarningMessage): WarningMessage => {
  const { open, warnings } = message;
  const refuse = (what: string, expected: string, got: string): never => {
    throw new ProtocolError('schema', `warning message: ${what}: expected ${expected}, got ${got}`);
  };
  const count = warnings.filter(({ status }) => isOpen(status)).length;
  if (count !== open) refuse('open', `${count}, the open ones listed`, `${open}`);
  for (const [i, { limit, earliest, likely, latest }] of warnings.entries()) {
    if (warnings.findIndex((one) => one.limit === limit) !== i)
      refuse(`warnings[${i}].limit`, 'each limit once', `${limit} again`);
    const times = [earliest, likely, latest].flatMap((time) => (time === null ? [] : [Date.parse(time)]));
    const isOrdered = times.every((time, k) => k === 0 || time >= times[k - 1]!);
    if (!isOrdered || (likely === null && times.length > 0))
      refuse(`warnings[${i}]`, 'earliest <= likely <= latest', `${earliest}, ${likely}, ${latest}`);
  }
  return message;
};

/**
 * Payload of one signal's warnings.
 *
 * shapes  at least one warning, each limit once
 * units   times ms since 1970; limits in the signal's unit
 * throws  ProtocolError 'encode' on a number that is not finite, 'schema' on what does not fit together
 */
export const warningMessage = (facts: WarningFacts): Uint8Array => {
  const message: WarningMessage = {
    ...writeHead('warning', facts),
    signal: facts.signal,
    unit: facts.unit,
    origin: formatInstant(facts.originMs),
    tick_s: facts.tickMs / 1000,
    horizon: facts.horizon,
    open: facts.warnings.filter(({ status }) => isOpen(status)).length,
    warnings: facts.warnings.map(limitFields),
  };
  const payload = writeJson(message);
  checkList(message);
  return payload;
};

/** Reads a warning message; throws ProtocolError 'size', 'decode', 'format' or 'schema'. */
export const parseWarningMessage = (payload: Uint8Array): WarningMessage =>
  checkList(readJson(warningSchema, 'warning', payload));
