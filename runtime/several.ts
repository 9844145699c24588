/**
 * Several sites in one process, each with a gateway, a connection, a lock and a data folder of its own. What fails in one
 * never stops the others: its gateway is let go as a crash would, and started anew from its data folder after a while.
 */
import type { GatewayConfig } from './config.ts';
import { Gateway } from './gateway.ts';
import { takeLock } from './lock.ts';
import { type Log, prefixed } from './log.ts';
import type { GatewayPorts } from './ports.ts';

/** A bundle to put to work first, and the file it came from. */
export interface FirstBundle {
  readonly path: string;
  readonly sealed: Uint8Array;
}

/** One site to be run. */
export interface SiteJob {
  readonly config: GatewayConfig;
  readonly bundles: readonly FirstBundle[];
}

/** What all sites share. */
export interface SeveralOptions {
  readonly ports: Omit<GatewayPorts, 'onFault'>;
  /** Told of every gateway that starts, those that start anew among them, and before anything has come in. */
  readonly onGateway?: (gateway: Gateway) => void;
  /** Puts a first bundle to work. throws  RuntimeError 'bundle' where nothing else serves and it will not do */
  readonly offer: (gateway: Gateway, bundle: FirstBundle) => void;
}

/** First wait before a failed site starts anew; doubles up to the most. */
const FIRST_WAIT_MS = 5000;
const MOST_WAIT_MS = 60_000;
/** A site that ran so long had recovered: its next fault waits like the first. */
const RECOVERED_MS = 600_000;

/** The gateways of one process; see the file head. */
export class Several {
  readonly #sites: readonly SiteRunner[];

  /**
   * Takes all locks, then starts all gateways; where one cannot, none runs.
   *
   * throws  RuntimeError 'locked', 'data-folder' or 'bundle'
   */
  constructor(jobs: readonly SiteJob[], options: SeveralOptions) {
    const { log } = options.ports;
    const sites: SiteRunner[] = [];
    this.#sites = sites;
    try {
      for (const { config, bundles } of jobs) {
        const own = jobs.length === 1 ? log : prefixed(log, config.site.site);
        sites.push(new SiteRunner({ config, bundles }, options, own, jobs.length > 1));
      }
      for (const site of sites) site.start();
    } catch (error) {
      for (const site of sites) void site.abandon();
      throw error;
    }
  }

  /** Those that run now, in the order of the jobs. */
  get gateways(): readonly Gateway[] {
    return this.#sites.flatMap(({ gateway }) => gateway ?? []);
  }

  /** Each says 'stopped' and leaves; at most two seconds. */
  async stop(): Promise<void> {
    await Promise.all(this.#sites.map((site) => site.stop()));
  }

  /** Cuts every line without a word. */
  async abandon(): Promise<void> {
    await Promise.all(this.#sites.map((site) => site.abandon()));
  }
}

class SiteRunner {
  gateway: Gateway | null = null;
  readonly #job: SiteJob;
  readonly #options: SeveralOptions;
  readonly #log: Log;
  /** Alone in its process a site that fails ends it: whoever watches over the process starts both anew. */
  readonly #mayRestart: boolean;
  readonly #unlock: () => void;
  #startedAt = 0;
  #waitMs = FIRST_WAIT_MS;
  #cancelRestart: () => void = () => {};
  #isOver = false;

  constructor(job: SiteJob, options: SeveralOptions, log: Log, mayRestart: boolean) {
    this.#job = job;
    this.#options = options;
    this.#log = log;
    this.#mayRestart = mayRestart;
    this.#unlock = takeLock(job.config.data);
  }

  start(): void {
    const { ports, onGateway, offer } = this.#options;
    const onFault = this.#mayRestart ? { onFault: (error: unknown) => this.#fail(error) } : {};
    const gateway = new Gateway(this.#job.config, { ...ports, log: this.#log, ...onFault });
    this.gateway = gateway;
    this.#startedAt = ports.clock.monotonic();
    onGateway?.(gateway);
    for (const bundle of this.#job.bundles) offer(gateway, bundle);
  }

  async stop(): Promise<void> {
    this.#isOver = true;
    this.#cancelRestart();
    try {
      await this.gateway?.stop();
    } catch (error) {
      this.#log.error(`not stopped cleanly: ${textOf(error)}`);
    }
    this.#unlock();
  }

  async abandon(): Promise<void> {
    this.#isOver = true;
    this.#cancelRestart();
    await this.gateway?.abandon();
    this.#unlock();
  }

  #fail(error: unknown): void {
    const { gateway } = this;
    if (gateway === null || this.#isOver) return;
    this.gateway = null;
    const { clock } = this.#options.ports;
    if (clock.monotonic() - this.#startedAt >= RECOVERED_MS) this.#waitMs = FIRST_WAIT_MS;
    this.#log.error(`failed: ${textOf(error)}; other sites go on, this one starts anew in ${this.#waitMs / 1000} s`);
    void gateway.abandon();
    this.#restartLater();
  }

  #restartLater(): void {
    this.#cancelRestart = this.#options.ports.clock.after(this.#waitMs, () => this.#restart());
    this.#waitMs = Math.min(MOST_WAIT_MS, 2 * this.#waitMs);
  }

  #restart(): void {
    try {
      this.start();
    } catch (error) {
      this.#log.error(`not started: ${textOf(error)}; next attempt in ${this.#waitMs / 1000} s`);
      void this.gateway?.abandon();
      this.gateway = null;
      this.#restartLater();
    }
  }
}

function textOf(error: unknown): string {
  return error instanceof Error ? error.message : String(error);
}
