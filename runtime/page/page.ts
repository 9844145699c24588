/**
 * The gateway's own page: looks on from inside, answers on a port of its own, and never gets in the loop's way. What it keeps
 * is bounded, what it computes is computed only while somebody looks, and whatever goes wrong in it is a line in the log.
 */
import type { IncomingMessage, ServerResponse } from 'node:http';
import type { Clock } from '../clock.ts';
import type { Gateway } from '../gateway.ts';
import type { Log } from '../log.ts';
import type { ConnectionEvent } from '../mqtt/connection.ts';
import type { Watcher } from '../watcher.ts';
import { isLoopback, type PageAddress, pageUrl } from './address.ts';
import { pageDocument } from './document.ts';
import { Teller } from './facts.ts';
import { Link } from './link.ts';
import { LoopDelay } from './loop-delay.ts';
import { METRICS_TYPE, metricsText } from './metrics.ts';
import { SaidBefore } from './said-before.ts';
import { type Answer, PageServer, type Routes, type ServerLimits } from './server.ts';
import { SnapshotWriter } from './snapshot.ts';
import { event, Viewers } from './viewers.ts';

/** What a page reaches of the world. */
export interface PagePorts {
  readonly clock: Clock;
  readonly log: Log;
  readonly limits?: Partial<ServerLimits>;
}

/** Ticks that come faster than this are told of together. */
const LEAST_BETWEEN_MS = 500;
/** Between ticks viewers hear so often that the gateway lives. */
const PULSE_MS = 5000;
/** Everything is put together at most this often, however many ask. */
const ALL_HOLDS_MS = 1000;
/** News of more ticks than this are no longer shorter than everything. */
const MOST_NEWS_TICKS = 120;
/** The loop comes round twice a second; one that did not for so long hangs, or its timer is lost. */
const DEAD_AFTER_MS = 10_000;
const RETRY_MS = 30_000;
const GOODBYE_MS = 500;
const JSON_TYPE = 'application/json; charset=utf-8';

/** See the file head. */
export class Page implements Watcher {
  readonly #gateway: Gateway;
  readonly #ports: PagePorts;
  readonly #viewers = new Viewers();
  readonly #said = new SaidBefore();
  readonly #delay = new LoopDelay();
  readonly #link: Link;
  readonly #teller: Teller;
  readonly #writer: SnapshotWriter;
  /** The last tick's messages, by signal; null: not made. */
  #forecasts: readonly Uint8Array[] | null = null;
  #all: { readonly bytes: Uint8Array; readonly atMs: number } | null = null;
  #pulsedAtMs: number;
  #saidAtMs = Number.NEGATIVE_INFINITY;
  /** The newest tick that viewers know, and by which bundle. */
  #told: { readonly tick: number; readonly sequence: number | null } = { tick: -1, sequence: null };
  #isUpdateDue = false;
  #fault = '';
  #server: PageServer | null = null;
  #cancelRetry: () => void = () => {};
  #isClosed = false;
  /** Where it listens; null: nowhere at present. */
  url: string | null = null;

  /** Looks on from now; `open` listens. */
  constructor(gateway: Gateway, ports: PagePorts) {
    const now = ports.clock.monotonic();
    this.#gateway = gateway;
    this.#ports = ports;
    this.#pulsedAtMs = now;
    this.#link = new Link(now);
    this.#teller = new Teller(gateway, ports.clock, this.#link, this.#delay);
    this.#writer = new SnapshotWriter(
      gateway,
      () => this.#teller.facts(),
      this.#said,
      () => pageDocument().digest,
    );
    gateway.watcher = this;
  }

  /** Listens; where the port is taken it is tried again, since forecasts must not wait for a page. Never rejects. */
  async open(address: PageAddress): Promise<void> {
    const { log, clock } = this.#ports;
    for (let at = 0; at < address.tries; at++) {
      const server = new PageServer(address, this.#routes(), clock, this.#ports.limits);
      try {
        const port = await server.listen(address.host, address.port === 0 ? 0 : address.port + at);
        this.#server = server;
        this.url = pageUrl(address.host, port);
        log.info(`page: ${this.url}`);
        if (!isLoopback(address.host))
          log.warn(`page: ${address.host} can be reached by other machines; it shows all readings, without a password`);
        if (this.#isClosed) await this.#leave();
        return;
      } catch (error) {
        const { code = 'error' } = error as { code?: string };
        const isTaken = code === 'EADDRINUSE';
        if (isTaken && at + 1 < address.tries) continue;
        const where = `${address.host}:${address.port}${address.tries > 1 ? ` to ${address.port + address.tries - 1}` : ''}`;
        this.#say(
          `page: cannot listen on ${where} (${isTaken ? 'in use by another program' : code}); forecasts go on without it, tried again every ${RETRY_MS / 1000} s; give another with --page`,
        );
        break;
      }
    }
    if (!this.#isClosed) this.#cancelRetry = clock.after(RETRY_MS, () => void this.open(address));
  }

  /** Tells viewers that the gateway stops, and ends. */
  async close(): Promise<void> {
    this.#isClosed = true;
    this.#cancelRetry();
    await this.#leave();
  }

  tick(forecasts: readonly Uint8Array[] | null): void {
    this.#guard(() => {
      this.#forecasts = forecasts;
      this.#all = null;
      const { serving } = this.#gateway.engine;
      if (serving !== null && serving.tick >= 0 && !serving.isWarming) this.#said.take(serving);
      this.#updateSoon();
    });
  }

  pulse(lateMs: number): void {
    this.#guard(() => {
      const now = this.#ports.clock.monotonic();
      this.#delay.pulse(lateMs, now);
      this.#pulsedAtMs = now;
      if (this.#viewers.count === 0) this.#all = null;
      else if (now - this.#saidAtMs >= PULSE_MS) {
        this.#saidAtMs = now;
        this.#viewers.say(event('pulse', this.#writer.pulse()), now);
      }
    });
  }

  line(event: ConnectionEvent): void {
    this.#guard(() => this.#link.take(event, this.#ports.clock.monotonic()));
  }

  #updateSoon(): void {
    if (this.#viewers.count === 0 || this.#isUpdateDue) return;
    const { clock } = this.#ports;
    const waitMs = this.#saidAtMs + LEAST_BETWEEN_MS - clock.monotonic();
    if (waitMs <= 0) {
      this.#update();
      return;
    }
    this.#isUpdateDue = true;
    clock.after(waitMs, () => {
      this.#isUpdateDue = false;
      this.#guard(() => this.#update());
    });
  }

  #update(): void {
    if (this.#viewers.count === 0 || this.#isClosed) return;
    const now = this.#ports.clock.monotonic();
    const since = this.#told;
    this.#told = this.#tellable();
    const isSmall = this.#told.sequence === since.sequence && this.#told.tick - since.tick <= MOST_NEWS_TICKS;
    this.#saidAtMs = now;
    this.#all = null;
    const all = (): Uint8Array => this.#everything(now);
    const news = isSmall ? event('tick', this.#writer.news(this.#made(), since.tick)) : all();
    this.#viewers.send({ news, all }, now);
  }

  #tellable(): { readonly tick: number; readonly sequence: number | null } {
    const { recent, serving } = this.#gateway.engine;
    return { tick: recent.firstTick + recent.count - 1, sequence: serving?.checked.sequence ?? null };
  }

  #made(): readonly Uint8Array[] {
    if (this.#forecasts === null || this.#forecasts.length === 0) this.#forecasts = this.#gateway.forecastsNow();
    return this.#forecasts;
  }

  #everything(now: number): Uint8Array {
    if (this.#all === null || now - this.#all.atMs > ALL_HOLDS_MS)
      this.#all = { bytes: event('all', this.#writer.all(this.#made())), atMs: now };
    return this.#all.bytes;
  }

  #routes(): Routes {
    const document = (): Answer => {
      const { html, policy } = pageDocument();
      return {
        status: 200,
        type: 'text/html; charset=utf-8',
        body: html,
        headers: { 'Content-Security-Policy': policy },
      };
    };
    return new Map<string, (request: IncomingMessage, response: ServerResponse) => Answer | null>([
      ['/', document],
      ['/events', (request, response) => this.#follow(request, response)],
      ['/state.json', () => ({ status: 200, type: JSON_TYPE, body: this.#writer.state(this.#made()) })],
      ['/metrics', () => ({ status: 200, type: METRICS_TYPE, body: this.#metrics() })],
      ['/healthz', () => this.#health()],
    ]);
  }

  #follow(request: IncomingMessage, response: ServerResponse): Answer | null {
    if (request.method === 'HEAD') return { status: 200, type: 'text/event-stream; charset=utf-8', body: '' };
    const now = this.#ports.clock.monotonic();
    if (this.#viewers.count === 0) this.#told = this.#tellable();
    this.#viewers.add(response, this.#everything(now), now);
    return null;
  }

  #metrics(): string {
    const { count, sumMs } = this.#delay;
    const now = this.#ports.clock.monotonic();
    return metricsText({
      gateway: this.#gateway,
      facts: this.#teller.facts(),
      forecasts: this.#made(),
      pulses: { count, sumMs, ageMs: now - this.#pulsedAtMs },
      viewers: this.#viewers.count,
      cpuSeconds: (process.cpuUsage().user + process.cpuUsage().system) / 1e6,
      heapBytes: process.memoryUsage().heapUsed,
    });
  }

  /** Whether the loop turns; how the plant is, health says. */
  #health(): Answer {
    const ageMs = this.#ports.clock.monotonic() - this.#pulsedAtMs;
    const isAlive = ageMs < DEAD_AFTER_MS;
    const body = JSON.stringify({
      alive: isAlive,
      pulse_age_s: Math.round(ageMs) / 1000,
      status: this.#gateway.status,
      up_s: Math.round(process.uptime()),
    });
    return { status: isAlive ? 200 : 503, type: JSON_TYPE, body };
  }

  async #leave(): Promise<void> {
    this.url = null;
    this.#viewers.close(event('stopped', '{}'));
    await this.#server?.close(GOODBYE_MS);
  }

  /** The gateway goes on whatever happens here. */
  #guard(work: () => void): void {
    try {
      work();
    } catch (error) {
      this.#say(`page: ${(error as Error).message}`);
    }
  }

  /** Once, until something else is to be said. */
  #say(text: string): void {
    if (text === this.#fault) return;
    this.#fault = text;
    this.#ports.log.error(text);
  }
}
