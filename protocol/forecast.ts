/**
 * The forecast message of one signal: median and bounds step by step, and how soon a limit will probably be crossed.
 * Retained JSON, one topic a signal.
 */
import { z } from 'zod';
import { ProtocolError } from './errors.ts';
import { formatInstant } from './instant.ts';
import { MAX_CHANNELS, MAX_HORIZON } from './limits.ts';
import { headFields, instantSchema, type MessageHead, nameSchema, readJson, writeHead, writeJson } from './message.ts';

/** Names of limits in messages. */
export const LIMIT_NAMES = ['high_high', 'high', 'low', 'low_low'] as const;
/** One of them. */
export type LimitName = (typeof LIMIT_NAMES)[number];

const path = z.array(z.number()).min(1).max(MAX_HORIZON);

/** One limit's outlook. */
export const limitOutlookSchema = z.strictObject({
  limit: z.enum(LIMIT_NAMES),
  value: z.number(),
  probability: z.number().min(0).max(1),
  time: instantSchema.nullable(),
});

/** What stands for an input ahead: a plan, what the past says of it, or its last value (led on by the driven kind itself). */
export const INPUT_USES = ['planned', 'expected', 'held'] as const;
/** One of them. */
export type InputUse = (typeof INPUT_USES)[number];

const difference = z.number().min(0);

/** What a forecast made of one input. */
export const inputOutlookSchema = z.strictObject({
  input: nameSchema,
  unit: z.string().min(1),
  use: z.enum(INPUT_USES),
  plan_age_s: z.number().min(0).nullable(),
  plan_until: instantSchema.nullable(),
  plan_error: difference.nullable(),
  usual_error: difference.nullable(),
});

/** Every field of a forecast message. */
export const forecastSchema = z.strictObject({
  ...headFields('forecast'),
  signal: nameSchema,
  unit: z.string().min(1),
  origin: instantSchema,
  tick_s: z.number().positive(),
  coverage: z.number().gt(0).lt(1),
  median: path,
  lower: path,
  upper: path,
  limits: z.array(limitOutlookSchema).max(LIMIT_NAMES.length),
  inputs: z.enum(['none', 'held', 'planned']),
  inputs_ahead: z.array(inputOutlookSchema).max(MAX_CHANNELS).optional(),
  last_reading_at: instantSchema.nullable(),
});

/** A forecast message as it stands in JSON. */
export type ForecastMessage = z.output<typeof forecastSchema>;

/** How soon a limit will probably be crossed. */
export interface LimitOutlook {
  readonly limit: LimitName;
  /** The limit, in the signal's unit. */
  readonly value: number;
  /** Probability of a crossing within the horizon. */
  readonly probability: number;
  /** When a crossing is first more likely than not; null if never within the horizon. */
  readonly timeMs: number | null;
}

/** What a forecast made of one input. */
export interface InputOutlook {
  readonly input: string;
  readonly unit: string;
  readonly use: InputUse;
  /** Since the ruling plan was made, or came; null without one. */
  readonly planAgeMs: number | null;
  /** How far it reaches; null without one. */
  readonly planUntilMs: number | null;
  /** Mean size of plan less what came, over the last horizon, in `unit`; null where nothing was planned and came. */
  readonly planError: number | null;
  /** The same of what stands for it without a plan, when the bundle was learned or of late; null where that is not known. */
  readonly usualError: number | null;
}

/** What a forecast message is made of, beside the head. */
export interface ForecastFacts extends MessageHead {
  readonly signal: string;
  readonly unit: string;
  /** Label of the last tick folded in; step h stands for origin + h ticks, at index h - 1. */
  readonly originMs: number;
  readonly tickMs: number;
  /** Share of readings the bounds are meant to hold. */
  readonly coverage: number;
  /** (H) each, in `unit`. */
  readonly median: ArrayLike<number>;
  readonly lower: ArrayLike<number>;
  readonly upper: ArrayLike<number>;
  readonly limits: readonly LimitOutlook[];
  /** Whether the site has inputs and, if so, whether a plan of any was used or the forecast went on from what they did. */
  readonly inputs: 'none' | 'held' | 'planned';
  /** One an input, in the site's order; left out of the message where there are none. */
  readonly inputsAhead?: readonly InputOutlook[];
  readonly lastReadingMs: number | null;
}

/** As it stands in JSON. */
export const limitOutlookFields = ({
  limit,
  value,
  probability,
  timeMs,
}: LimitOutlook): z.output<typeof limitOutlookSchema> => ({
  limit,
  value,
  probability,
  time: timeMs === null ? null : formatInstant(timeMs),
});

/** As it stands in JSON. */
export const outlookFields = (outlook: InputOutlook): z.output<typeof inputOutlookSchema> => ({
  input: outlook.input,
  unit: outlook.unit,
  use: outlook.use,
  plan_age_s: outlook.planAgeMs === null ? null : Math.max(0, outlook.planAgeMs) / 1000,
  plan_until: outlook.planUntilMs === null ? null : formatInstant(outlook.planUntilMs),
  plan_error: outlook.planError,
  usual_error: outlook.usualError,
});

/** Refuses paths of unlike lengths and bounds that do not hold the median. */
const checkPaths = (message: ForecastMessage): ForecastMessage => {
  const { median, lower, upper } = message;
  if (lower.length !== median.length || upper.length !== median.length) {
    const got = `median ${median.length}, lower ${lower.length}, upper ${upper.length}`;
    throw new ProtocolError('schema', `forecast message: expected three paths of one length, got ${got}`);
  }
  const at = median.findIndex((value, i) => !(lower[i]! <= value && value <= upper[i]!));
  if (at >= 0) {
    const got = `${lower[at]}, ${median[at]}, ${upper[at]}`;
    throw new ProtocolError(
      'schema',
      `forecast message: step ${at + 1}: expected lower <= median <= upper, got ${got}`,
    );
  }
  return message;
};

/**
 * Payload of one signal's forecast.
 *
 * shapes  median, lower, upper (H), step h at index h - 1
 * units   times ms since 1970; paths and limits in the signal's unit
 * throws  ProtocolError 'encode' on a number that is not finite, 'schema' on paths that do not fit together
 */
export const forecastMessage = (facts: ForecastFacts): Uint8Array => {
  const message: ForecastMessage = {
    ...writeHead('forecast', facts),
    signal: facts.signal,
    unit: facts.unit,
    origin: formatInstant(facts.originMs),
    tick_s: facts.tickMs / 1000,
    coverage: facts.coverage,
    median: Array.from(facts.median),
    lower: Array.from(facts.lower),
    upper: Array.from(facts.upper),
    limits: facts.limits.map(limitOutlookFields),
    inputs: facts.inputs,
    ...(facts.inputsAhead?.length ? { inputs_ahead: facts.inputsAhead.map(outlookFields) } : {}),
    last_reading_at: facts.lastReadingMs === null ? null : formatInstant(facts.lastReadingMs),
  };
  const payload = writeJson(message);
  checkPaths(message);
  return payload;
};

/** Reads a forecast message; throws ProtocolError 'size', 'decode', 'format' or 'schema'. */
export const parseForecastMessage = (payload: Uint8Array): ForecastMessage =>
  checkPaths(readJson(forecastSchema, 'forecast', payload));
