/**
 * Hands one sealed bundle to one site: retained on its bundle topic, then watched until the gateway's health names it as
 * serving or says why not. Retained, so that a gateway that is away finds it when it comes back.
 */
import { type HealthMessage, parseHealthMessage, topicsOf } from '@stillwell/protocol';
import { brokerError, clientIdFor, connectBroker, subscribeTo } from '../broker.ts';

/** One bundle for one site, and how long to wait for the word. */
export interface RollOptions {
  readonly broker: string;
  readonly root: string;
  readonly site: string;
  /** The sealed bundle, and what its envelope says. */
  readonly sealed: Uint8Array;
  readonly digest: string;
  readonly sequence: number;
  readonly waitMs: number;
  readonly onHealth?: (health: HealthMessage) => void;
  readonly connectTimeoutMs?: number;
}

/**
 * serving   the gateway names the bundle
 * refused   it names the bundle as not taken, with its reason
 * silent    no word about the bundle in the time given; `health` is the last message, null when none came at all
 */
export interface RollOutcome {
  readonly outcome: 'serving' | 'refused' | 'silent';
  readonly gateway: string | null;
  readonly reason: string | null;
  readonly tookMs: number;
  readonly health: HealthMessage | null;
}

/** The retained health of before, if there is one, has come by then. */
const SETTLE_MS = 300;

/**
 * Publishes and waits.
 *
 * throws  TrainError 'broker' when it cannot connect or publish
 */
export async function rollBundle(options: RollOptions): Promise<RollOutcome> {
  const topics = topicsOf(options.root, options.site);
  const started = Date.now();
  let settle: (outcome: RollOutcome) => void = () => {};
  const settled = new Promise<RollOutcome>((resolve) => {
    settle = resolve;
  });
  let health: HealthMessage | null = null;
  let before: string | null = null;
  let isOffered = false;
  const judge = (): void => {
    if (health === null || !isOffered) return;
    const { outcome, reason } = standing(health, options, before);
    if (outcome !== null) settle({ outcome, reason, gateway: health.gateway, tookMs: Date.now() - started, health });
  };
  const onMessage = (topic: string, payload: Uint8Array): void => {
    if (topic !== topics.health) return;
    try {
      health = parseHealthMessage(payload);
    } catch {
      return; // not a health message of this version; the time limit speaks if none comes
    }
    options.onHealth?.(health);
    if (!isOffered) before = changeOf(health);
    judge();
  };
  const connection = await connectBroker({
    url: options.broker,
    clientId: clientIdFor('roll'),
    onMessage,
    ...(options.connectTimeoutMs === undefined ? {} : { connectTimeoutMs: options.connectTimeoutMs }),
  });
  const timer = setTimeout(
    () =>
      settle({
        outcome: 'silent',
        reason: null,
        gateway: health?.gateway ?? null,
        tookMs: Date.now() - started,
        health,
      }),
    options.waitMs,
  );
  try {
    await subscribeTo(connection, [topics.health]);
    await new Promise((resolve) => setTimeout(resolve, SETTLE_MS));
    isOffered = true;
    await connection.publish({ topic: topics.bundle, payload: options.sealed, qos: 1, retain: true });
    judge();
    return await settled;
  } catch (cause) {
    throw brokerError(cause);
  } finally {
    clearTimeout(timer);
    await connection.end();
  }
}

function standing(health: HealthMessage, options: RollOptions, before: string | null) {
  const isServing = health.bundle === options.digest && health.sequence === options.sequence;
  if (isServing && health.status !== 'lost' && health.status !== 'stopped') {
    return { outcome: 'serving', reason: null } as const;
  }
  const change = health.last_change;
  if (change?.outcome === 'refused' && changeOf(health) !== before) {
    return { outcome: 'refused', reason: change.reason ?? 'no reason given' } as const;
  }
  return { outcome: null, reason: null };
}

function changeOf(health: HealthMessage): string | null {
  return health.last_change === null ? null : JSON.stringify(health.last_change);
}
