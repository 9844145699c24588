/**
 * The times a tick's messages carry, the same for state and forecasts.
 *
 * valid_until is three ticks after the successor was due: a forecast not replaced by then comes from a gateway that has
 * stopped, hung or lost its broker, and must not be read as new, however far its horizon still reaches.
 */
import type { InputOutlook, MessageHead, Site } from '@stillwell/protocol';
import type { PlanKeeper } from '../ingest/plans.ts';
import type { Outgoing } from '../mqtt/connection.ts';
import type { Serving } from '../serving.ts';
import { planFault } from './inputs.ts';
import { judge } from './quality.ts';

const GRACE_TICKS = 3;

/** Who publishes, when, and in which circumstances. */
export interface Occasion {
  readonly site: Site;
  readonly gateway: string;
  readonly issuedAtMs: number;
  readonly isCatchingUp: boolean;
  readonly plans: PlanKeeper;
  /** What the forecasts made of the inputs. */
  readonly inputs: readonly InputOutlook[];
}

/** When the messages of a tick cease to hold, ms since 1970. */
export function validUntil(tick: number, site: Site): number {
  const successorDueMs = (tick + 2) * site.tickMs + site.latenessMs;
  return successorDueMs + GRACE_TICKS * site.tickMs;
}

/** How long a broker keeps a message; of event time, which is not its own, it knows nothing. */
export function expiryOf(
  isWallTime: boolean,
  validUntilMs: number,
  issuedAtMs: number,
): Pick<Outgoing, 'expirySeconds'> {
  const leftMs = validUntilMs - issuedAtMs;
  return isWallTime && leftMs > 0 ? { expirySeconds: leftMs / 1000 } : {};
}

/** The common part of a tick's messages, judged for one signal or for all. */
export function headOf(serving: Serving, occasion: Occasion, signal: number | null): MessageHead {
  const { site, gateway, issuedAtMs, isCatchingUp, plans, inputs } = occasion;
  return {
    site: site.site,
    gateway,
    bundle: serving.checked.digest,
    sequence: serving.checked.sequence,
    issuedAtMs,
    validUntilMs: validUntil(serving.tick, site),
    ...judge(serving, isCatchingUp, signal, planFault(serving, plans, inputs, signal)),
  };
}
