/**
 * The page's HTTP server: read-only, small, and never more than the gateway can spare. Everything is bounded: connections,
 * header bytes, the time of each answer, requests a second. What a request is answered with, others decide.
 */
import { createServer, type IncomingMessage, type Server, type ServerResponse } from 'node:http';
import type { AddressInfo } from 'node:net';
import { hostname } from 'node:os';
import type { Clock } from '../clock.ts';
import { type Allowance, TokenBucket } from '../token-bucket.ts';
import { isLoopback, type PageAddress } from './address.ts';
import { ownNames, refusalOf } from './guard.ts';
import { MOST_VIEWERS } from './viewers.ts';

/** What is answered on a path. */
export interface Answer {
  readonly status: number;
  readonly type: string;
  readonly body: string | Uint8Array;
  readonly headers?: Readonly<Record<string, string>>;
}

/** Answers by path; one that returns null has taken the response over. */
export type Routes = ReadonlyMap<string, (request: IncomingMessage, response: ServerResponse) => Answer | null>;

/** What the server may take; tests choose less. */
export interface ServerLimits {
  /** Answered, so that a flood costs the loop little more than its refusals. */
  readonly requests: Allowance;
  /** Until the header has come, ms. */
  readonly headerMs: number;
  /** Until an answer is taken, ms; viewers excepted. */
  readonly answerMs: number;
}

const LIMITS: ServerLimits = { requests: { burst: 60, perSecond: 20 }, headerMs: 5000, answerMs: 15_000 };
/** Browsers open up to six each. */
const MOST_CONNECTIONS = MOST_VIEWERS + 24;
const MOST_HEADER_BYTES = 8192;
const MOST_HEADERS = 64;
const KEEP_ALIVE_MS = 5000;
const CHECKED_EVERY_MS = 1000;
const MOST_REQUESTS_A_CONNECTION = 100;
const PLAIN = 'text/plain; charset=utf-8';
/** On every answer: nothing of it is for other sites, nor kept. */
const HEADERS = {
  'Cache-Control': 'no-store',
  'Cross-Origin-Resource-Policy': 'same-origin',
  'Cross-Origin-Opener-Policy': 'same-origin',
  'Referrer-Policy': 'no-referrer',
  'X-Content-Type-Options': 'nosniff',
  'X-Frame-Options': 'DENY',
  'Content-Security-Policy': "default-src 'none'; frame-ancestors 'none'",
} as const;

/** See the file head. */
export class PageServer {
  readonly #server: Server;
  readonly #routes: Routes;
  readonly #clock: Clock;
  readonly #limits: ServerLimits;
  readonly #requests: TokenBucket;
  readonly #names: ReadonlySet<string>;

  constructor(address: PageAddress, routes: Routes, clock: Clock, limits: Partial<ServerLimits> = {}) {
    this.#routes = routes;
    this.#clock = clock;
    this.#limits = { ...LIMITS, ...limits };
    const { requests, headerMs } = this.#limits;
    this.#requests = new TokenBucket(requests, clock.monotonic());
    this.#names = ownNames(address.host, hostname(), isLoopback(address.host));
    this.#server = createServer(
      {
        maxHeaderSize: MOST_HEADER_BYTES,
        headersTimeout: headerMs,
        requestTimeout: headerMs,
        keepAliveTimeout: KEEP_ALIVE_MS,
        connectionsCheckingInterval: Math.min(CHECKED_EVERY_MS, headerMs),
      },
      (request, response) => this.#answer(request, response),
    );
    this.#server.maxConnections = MOST_CONNECTIONS;
    this.#server.maxHeadersCount = MOST_HEADERS;
    this.#server.maxRequestsPerSocket = MOST_REQUESTS_A_CONNECTION;
  }

  /** Listens, and resolves with the port. throws  the system's error, such as EADDRINUSE */
  listen(host: string, port: number): Promise<number> {
    return new Promise((resolve, reject) => {
      this.#server.once('error', reject);
      this.#server.listen(port, host, () => {
        this.#server.off('error', reject);
        // Too few file descriptors for one more connection, say: the page does without it, the gateway must not end.
        this.#server.on('error', () => {});
        resolve((this.#server.address() as AddressInfo).port);
      });
    });
  }

  /** Takes no more connections, and ends those there are once what was written to them has gone, soon at the latest. */
  async close(patienceMs: number): Promise<void> {
    if (!this.#server.listening) return;
    const closed = new Promise<void>((resolve) => this.#server.close(() => resolve()));
    this.#server.closeIdleConnections();
    const cancel = this.#clock.after(patienceMs, () => this.#server.closeAllConnections());
    await closed;
    cancel();
  }

  #answer(request: IncomingMessage, response: ServerResponse): void {
    if (!this.#requests.take(this.#clock.monotonic())) {
      const text = 'Too many requests: a few a second are answered.';
      this.#send(request, response, { status: 429, type: PLAIN, body: text, headers: { 'Retry-After': '1' } }, true);
      return;
    }
    const refusal = refusalOf({ method: request.method ?? '', headers: request.headers }, this.#names);
    if (refusal !== null) {
      const { status, text } = refusal;
      const headers = status === 405 ? { Allow: 'GET, HEAD' } : {};
      this.#send(request, response, { status, type: PLAIN, body: text, headers }, true);
      return;
    }
    const path = (request.url ?? '/').split('?', 1)[0]!;
    const route = this.#routes.get(path);
    if (route === undefined) {
      const known = [...this.#routes.keys()].join(' ');
      this.#send(request, response, { status: 404, type: PLAIN, body: `Nothing here. There is: ${known}` }, false);
      return;
    }
    for (const [name, value] of Object.entries(HEADERS)) response.setHeader(name, value);
    const answer = this.#make(route, request, response);
    if (answer !== null) this.#send(request, response, answer, false);
  }

  /** A fault of ours in here is one answer lost and nothing else. */
  #make(
    route: (request: IncomingMessage, response: ServerResponse) => Answer | null,
    request: IncomingMessage,
    response: ServerResponse,
  ): Answer | null {
    try {
      return route(request, response);
    } catch (error) {
      return { status: 500, type: PLAIN, body: `This answer could not be made: ${(error as Error).message}` };
    }
  }

  /** isLast  the connection ends behind it, and with it whatever else was sent on it */
  #send(request: IncomingMessage, response: ServerResponse, answer: Answer, isLast: boolean): void {
    const { status, type, body, headers = {} } = answer;
    const bytes = typeof body === 'string' ? Buffer.from(body.endsWith('\n') ? body : `${body}\n`) : body;
    const cancel = this.#clock.after(this.#limits.answerMs, () => response.destroy());
    response.on('close', cancel);
    response.writeHead(status, {
      ...HEADERS,
      'Content-Type': type,
      'Content-Length': bytes.length,
      ...headers,
      ...(isLast ? { Connection: 'close' } : {}),
    });
    response.end(request.method === 'HEAD' ? undefined : bytes);
  }
}
