/**
 * Sends a tick's messages and the gateway's health. Forecasts go at QoS 0, retained: each replaces the one before, so a
 * lost one is not worth a second try. Nothing is queued while the broker is away or slow.
 */
import type { BundleChange, HealthStatus, SiteTopics } from '@stillwell/protocol';
import type { GatewayConfig } from '../config.ts';
import type { Engine } from '../engine.ts';
import type { PlanKeeper } from '../ingest/plans.ts';
import type { Connection, Outgoing, Will } from '../mqtt/connection.ts';
import type { GatewayPorts } from '../ports.ts';
import type { ShipCounts } from '../residuals/ship.ts';
import type { Serving } from '../serving.ts';
import { writeStatus } from '../status.ts';
import { forecastPayload, forecastsPayload } from './forecasts.ts';
import { type HealthReport, healthPayload, willPayload } from './health.ts';
import { inputOutlooks } from './inputs.ts';
import { expiryOf, type Occasion, validUntil } from './moment.ts';
import { type Outlook, outlooksOf } from './outlooks.ts';
import { statePayload } from './state.ts';
import { type OpenNow, Warnings } from './warnings.ts';

const JSON_TYPE = 'application/json';
const MSGPACK_TYPE = 'application/vnd.msgpack';
/** Unsent bytes above which a tick's forecasts are skipped: the broker or the line is slower than the plant. */
const MOST_BACKLOG_BYTES = 1024 * 1024;
/** Health said more often than this is joined. */
const LEAST_BETWEEN_MS = 1000;
const LAST_WORD_MS = 800;
const DEFAULT_WILL_DELAY_SECONDS = 10;

/** What health is said of, beside what the publisher knows itself. */
export interface HealthNow {
  readonly status: HealthStatus;
  readonly lastChange: BundleChange | null;
  readonly engine: Engine;
  readonly ship: ShipCounts;
  readonly doubt: string | null;
  readonly counts: NonNullable<HealthReport['counts']>;
}

/** See the file head. */
export class Publisher {
  reconnects = 0;
  /** Forecasts of single signals handed to the broker. */
  forecastsIssued = 0;
  isCatchingUp = false;
  readonly #config: GatewayConfig;
  readonly #ports: GatewayPorts;
  readonly #connection: Connection;
  readonly #topics: SiteTopics;
  readonly #warnings: Warnings;
  #healthAt = Number.NEGATIVE_INFINITY;
  #isHealthWanted = false;

  constructor(config: GatewayConfig, ports: GatewayPorts, connection: Connection, topics: SiteTopics) {
    this.#config = config;
    this.#ports = ports;
    this.#connection = connection;
    this.#topics = topics;
    const { site, data: folder, clock } = config;
    const isWallTime = clock === 'wall';
    const isReady = (): boolean => this.#isReady;
    const publish = (message: Outgoing): Promise<void> => connection.publish(message);
    this.#warnings = new Warnings({
      site,
      topics,
      folder,
      disk: ports.disk,
      log: ports.log,
      isWallTime,
      isReady,
      publish,
    });
  }

  /** The broker is there and keeps up. */
  get #isReady(): boolean {
    return this.#connection.isConnected && this.#connection.backlogBytes <= MOST_BACKLOG_BYTES;
  }

  /** Call when the broker is there again. */
  connected(): void {
    this.#warnings.reconnected();
  }

  /** What the broker publishes when the gateway vanishes. */
  static will(config: GatewayConfig, ports: GatewayPorts, topic: string): Will {
    const payload = willPayload(config.site.site, config.gateway, ports.clock.wall());
    const delaySeconds = ports.willDelaySeconds ?? DEFAULT_WILL_DELAY_SECONDS;
    return { topic, payload, qos: 1, retain: true, contentType: JSON_TYPE, delaySeconds };
  }

  /** Who publishes now, and in which circumstances. */
  occasionOf(serving: Serving, plans: PlanKeeper, issuedAtMs: number): Occasion {
    const { site, gateway } = this.#config;
    const inputs = inputOutlooks(serving, plans, site, issuedAtMs);
    return { site, gateway, issuedAtMs, isCatchingUp: this.isCatchingUp, plans, inputs };
  }

  /** State and forecasts of the tick that `serving` has folded in last; the forecasts' payloads, or null: none were sent. */
  tick(
    serving: Serving,
    plans: PlanKeeper,
    lastReadingMs: Float64Array,
    issuedAtMs: number,
  ): readonly Uint8Array[] | null {
    const { site, clock } = this.#config;
    const occasion = this.occasionOf(serving, plans, issuedAtMs);
    const outlooks = this.#outlooks(serving);
    // Also while nobody can be told: what was said before must not look different after.
    this.#warnings.tick(serving, occasion, outlooks);
    if (!this.#isReady) return null;
    const forecasts = this.#forecasts(serving, lastReadingMs, occasion, outlooks);
    const expiry = expiryOf(clock === 'wall', validUntil(serving.tick, site), issuedAtMs);
    const send = (topic: string, payload: Uint8Array, contentType: string): void => {
      this.#send({ topic, payload, qos: 0, retain: true, contentType, ...expiry });
    };
    for (const [i, payload] of forecasts.entries())
      send(this.#topics.forecast(serving.checked.bundle.channels[i]!.name), payload, JSON_TYPE);
    this.forecastsIssued += forecasts.length;
    send(this.#topics.forecastAll, forecastsPayload(serving, occasion), MSGPACK_TYPE);
    send(this.#topics.state, statePayload(serving, occasion), JSON_TYPE);
    return forecasts;
  }

  /** The forecast messages of the last tick, by signal, for whoever asks on this machine. */
  forecastsNow(serving: Serving, occasion: Occasion, lastReadingMs: Float64Array): readonly Uint8Array[] {
    return this.#forecasts(serving, lastReadingMs, occasion, this.#outlooks(serving));
  }

  /** Warnings open now. */
  get openWarnings(): readonly OpenNow[] {
    return this.#warnings.openNow();
  }

  /** A tick closed without a bundle that could forecast. */
  silent(tick: number, issuedAtMs: number): void {
    const { site, gateway } = this.#config;
    this.#warnings.without({ site: site.site, gateway, issuedAtMs }, tick);
  }

  /** Whether health should be said again: its time has come, or something was left unsaid. */
  isHealthDue(): boolean {
    const since = this.#ports.clock.monotonic() - this.#healthAt;
    return since >= this.#config.healthSeconds * 1000 || (this.#isHealthWanted && since >= LEAST_BETWEEN_MS);
  }

  /** Says how the gateway is, to the broker and in the data folder; at most once a second unless it is the last word. */
  async health(report: HealthNow): Promise<void> {
    const now = this.#ports.clock.monotonic();
    if (now - this.#healthAt < LEAST_BETWEEN_MS && report.status !== 'stopped') {
      this.#isHealthWanted = true;
      return;
    }
    this.#healthAt = now;
    this.#isHealthWanted = false;
    const payload = this.healthNow(report);
    writeStatus(this.#ports.disk, this.#config.data, payload);
    const said = this.#send({ topic: this.#topics.health, payload, qos: 1, retain: true, contentType: JSON_TYPE });
    // The last word must not wait for ever on a broker that hangs.
    const patience = new Promise<void>((resolve) => this.#ports.clock.after(LAST_WORD_MS, resolve));
    await (report.status === 'stopped' ? Promise.race([said, patience]) : said);
  }

  /** The health message as it would be said now. */
  healthNow(report: HealthNow): Uint8Array {
    const { site, gateway, clock, healthSeconds } = this.#config;
    return healthPayload({
      ...report,
      site: site.site,
      gateway,
      nowMs: this.#ports.clock.wall(),
      wallTickMs: clock === 'wall' ? site.tickMs : null,
      holdsMs: 3 * healthSeconds * 1000,
      reconnects: this.reconnects,
      counts: { warnings_open: this.#warnings.open, warnings_opened: this.#warnings.opened, ...report.counts },
    });
  }

  #outlooks(serving: Serving): readonly (readonly Outlook[])[] {
    // A reading that is held says nothing of what it will come to.
    return this.#config.site.signals.map(({ limits }, i) =>
      serving.isHolding ? [] : outlooksOf(serving, serving.median, i, limits),
    );
  }

  #forecasts(
    serving: Serving,
    lastReadingMs: Float64Array,
    occasion: Occasion,
    outlooks: readonly (readonly Outlook[])[],
  ): readonly Uint8Array[] {
    serving.computeBounds();
    return outlooks.map((limits, i) => forecastPayload(serving, occasion, i, limits, lastReadingMs[i]!));
  }

  /** A message that does not get through is followed by a newer one, or by the will. */
  async #send(message: Outgoing): Promise<void> {
    try {
      await this.#connection.publish(message);
    } catch (error) {
      this.#ports.log.debug((error as Error).message);
    }
  }
}
