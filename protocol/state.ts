/**
 * The state message: what the plant is doing beneath the noise, once a tick. Retained JSON.
 */
import { z } from 'zod';
import { formatInstant } from './instant.ts';
import { headFields, instantSchema, type MessageHead, nameSchema, readJson, writeHead, writeJson } from './message.ts';

/** Every field of a state message. */
export const stateSchema = z.strictObject({
  ...headFields('state'),
  origin: instantSchema,
  tick_s: z.number().positive(),
  filtered: z.record(nameSchema, z.number()),
  state: z.array(z.number()),
  missing: z.array(nameSchema),
});

/** A state message as it stands in JSON. */
export type StateMessage = z.output<typeof stateSchema>;

/** What a state message is made of, beside the head. */
export interface StateFacts extends MessageHead {
  /** Label of the last tick folded in. */
  readonly originMs: number;
  readonly tickMs: number;
  /** The filter's value of each signal at the origin, in its unit. */
  readonly filtered: Readonly<Record<string, number>>;
  /** The predictive state x. */
  readonly state: ArrayLike<number>;
  /** Signals without a reading at the origin. */
  readonly missing: readonly string[];
}

/**
 * Payload of a state message.
 *
 * units   times ms since 1970; filtered in each signal's unit; state standardised
 * throws  ProtocolError 'encode' on a number that is not finite
 */
export const stateMessage = (facts: StateFacts): Uint8Array => {
  const message: StateMessage = {
    ...writeHead('state', facts),
    origin: formatInstant(facts.originMs),
    tick_s: facts.tickMs / 1000,
    filtered: { ...facts.filtered },
    state: Array.from(facts.state),
    missing: [...facts.missing],
  };
  return writeJson(message);
};

/** Reads a state message; throws ProtocolError 'size', 'decode', 'format' or 'schema'. */
export const parseStateMessage = (payload: Uint8Array): StateMessage => readJson(stateSchema, 'state', payload);
