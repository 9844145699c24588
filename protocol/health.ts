/**
 * The health message: whether a gateway works, what it counted, and what last changed. Retained JSON; the broker
 * publishes it as the will, with status 'lost', when the gateway vanishes.
 */
import { z } from 'zod';
import { formatInstant } from './instant.ts';
import { headFields, instantSchema, type MessageHead, readJson, writeHead, writeJson } from './message.ts';

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

/** Every field of a health message. */
export const healthSchema = z.strictObject({
  ...headFields('health'),
  status: z.enum(HEALTH_STATUSES),
  counters: countersSchema,
  last_change: lastChangeSchema.nullable(),
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
  const change = facts.lastChange;
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
    versions: { ...facts.versions },
  };
  return writeJson(message);
};

/** Reads a health message; throws ProtocolError 'size', 'decode', 'format' or 'schema'. */
export const parseHealthMessage = (payload: Uint8Array): HealthMessage => readJson(healthSchema, 'health', payload);
