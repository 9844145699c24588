/**
 * The times a tick's messages carry, the same for state and forecasts.
 *
 * valid_until is three ticks after the successor was due: a forecast not replaced by then comes from a gateway that has
 * stopped, hung or lost its broker, and must not be read as new, however far its horizon still reaches.
 */
import type { MessageHead, Site } from '@stillwell/protocol';
import type { Serving } from '../serving.ts';
import { judge } from './quality.ts';

const GRACE_TICKS = 3;

/** Who publishes, when, and in which circumstances. */
export interface Occasion {
  readonly site: Site;
  readonly gateway: string;
  readonly issuedAtMs: number;
  readonly isCatchingUp: boolean;
}

/** When the messages of a tick cease to hold, ms since 1970. */
export function validUntil(tick: number, site: Site): number {
  const successorDueMs = (tick + 2) * site.tickMs + site.latenessMs;
  return successorDueMs + GRACE_TICKS * site.tickMs;
}

/** The common part of a tick's messages, judged for one signal or for all. */
export function headOf(serving: Serving, occasion: Occasion, signal: number | null): MessageHead {
  const { site, gateway, issuedAtMs, isCatchingUp } = occasion;
  return {
    site: site.site,
    gateway,
    bundle: serving.checked.digest,
    sequence: serving.checked.sequence,
    issuedAtMs,
    validUntilMs: validUntil(serving.tick, site),
    ...judge(serving, isCatchingUp, signal),
  };
}
