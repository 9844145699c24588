/**
 * The health message: whether a gateway works, what it counted, and what last changed. Retained JSON; the broker
 * publishes it as the will, with status 'lost', when the gateway vanishes.
 */
import { z } from 'zod';
import { formatInstant } from './instant.ts';
import {
  headFields,
  instantSchema,
  type MessageHead,
  nameSchema,
  qualitySchema,
  readJson,
  writeHead,
  writeJson,
} from './message.ts';

/** What a gateway is doing; 'lost' is said by the broker in its name. */
export const HEALTH_STATUSES = ['starting', 'no-bundle', 'warming', 'running', 'stopped', 'lost'] as const;
/** One of them. */
export type HealthStatus = (typeof HEALTH_STATUSES)[number];

const count = z.int().min(0);
const countsByCause = z.record(z.string().min(1), count);

/** Counts since the gateway started; further counts, plain or by cause, may stand beside the named ones. */
export const countersSchema = z
  .object({
    readings: count,
    refused: countsByCause,
    late: count,
    ticks: count,
    segments_open: count,
    segments_waiting: count,
    segments_confirmed: count,
  })
  .catchall(z.union([count, countsByCause]));

/** The last attempt to change the serving bundle. */
export const lastChangeSchema = z.strictObject({
  at: instantSchema,
  from: z.string().min(1).nullable(),
  to: z.string().min(1).nullable(),
  outcome: z.string().min(1),
  reason: z.string().min(1).nullable(),
});

/** What may be the matter with a signal. */
export const SIGNAL_WORDS = [
  'out-of-range',
  'stuck',
  'absent',
  'disagreeing',
  'implausible',
  'noisy',
  'jumping',
  'drifting',
] as const;
/** One of them. */
export type SignalWord = (typeof SIGNAL_WORDS)[number];

/** One signal; of a good one the age of its last reading alone is said. */
export const signalHealthSchema = z.strictObject({
  signal: nameSchema,
  /** Seconds; null before the first reading. */
  last_reading_s: z.number().min(0).nullable(),
  quality: qualitySchema.optional(),
  reason: z.string().min(1).optional(),
  words: z.array(z.enum(SIGNAL_WORDS)).min(1).optional(),
  refused: count.optional(),
  passed_over: count.optional(),
});
/** As it stands in JSON. */
export type SignalHealth = z.output<typeof signalHealthSchema>;

/** What a gateway does, rising, about a filter whose forecasts leave all bounds, or that fails. */
export const DIVERGENCE_STEPS = ['passing-over', 'widened', 'reset', 'previous-bundle', 'holding'] as const;
/** One of them. */
export type DivergenceStep = (typeof DIVERGENCE_STEPS)[number];

/** What is done about such a filter at present. */
export const divergenceSchema = z.strictObject({
  step: z.enum(DIVERGENCE_STEPS),
  /** End of the tick at which that step was taken. */
  since: instantSchema,
  reason: z.string().min(1),
});

/** Every field of a health message. */
export const healthSchema = z.strictObject({
  ...headFields('health'),
  status: z.enum(HEALTH_STATUSES),
  counters: countersSchema,
  last_change: lastChangeSchema.nullable(),
  signals: z.array(signalHealthSchema).optional(),
  divergence: divergenceSchema.optional(),
  versions: z.record(z.string().min(1), z.string()),
});

/** Counts of a health message: those every gateway says, and whatever else it counts, plain or by cause. */
export interface HealthCounters {
  readonly readings: number;
  readonly refused: Readonly<Record<string, number>>;
  readonly late: number;
  readonly ticks: number;
  readonly segments_open: number;
  readonly segments_waiting: number;
  readonly segments_confirmed: number;
  readonly [further: string]: number | Readonly<Record<string, number>>;
}

/** A health message as it stands in JSON. */
export type HealthMessage = Omit<z.output<typeof healthSchema>, 'counters'> & { readonly counters: HealthCounters };

/** A change of bundle: digests in hexadecimal, null for none. */
export interface BundleChange {
  readonly atMs: number;
  readonly from: string | null;
  readonly to: string | null;
  /** One word a program may switch on, such as 'changed' or 'refused'. */
  readonly outcome: string;
  readonly reason: string | null;
}

/** What a health message is made of, beside the head. */
export interface HealthFacts extends MessageHead {
  readonly status: HealthStatus;
  readonly counters: HealthCounters;
  readonly lastChange: BundleChange | null;
  /** In the site's order; absent where no bundle serves. */
  readonly signals?: readonly SignalHealth[];
  /** Absent: nothing need be done. */
  readonly divergence?: { readonly step: DivergenceStep; readonly sinceMs: number; readonly reason: string };
  /** Of the program, its formats and the machine's runtime. */
  readonly versions: Readonly<Record<string, string>>;
}

/**
 * Payload of a health message.
 *
 * units   times ms since 1970; counters are counts since start
 * throws  ProtocolError 'encode' on a number that is not finite
 */
export const healthMessage = (facts: HealthFacts): Uint8Array => {
  const { lastChange: change, signals, divergence } = facts;
  const message: HealthMessage = {
    ...writeHead('health', facts),
    status: facts.status,
    counters: facts.counters,
    last_change:
      change === null
        ? null
        : {
            at: formatInstant(change.atMs),
            from: change.from,
            to: change.to,
            outcome: change.outcome,
            reason: change.reason,
          },
    ...(signals === undefined ? {} : { signals: [...signals] }),
    ...(divergence === undefined
      ? {}
      : {
          divergence: {
            step: divergence.step,
            since: formatInstant(divergence.sinceMs),
            reason: divergence.reason,
          },
        }),
    versions: { ...facts.versions },
  };
  return writeJson(message);
};

/** Reads a health message; throws ProtocolError 'size', 'decode', 'format' or 'schema'. */
export const parseHealthMessage = (payload: Uint8Array): HealthMessage => readJson(healthSchema, 'health', payload);
