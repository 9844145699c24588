/** Where the page listens, as `--page` says it. */
import { isIPv6 } from 'node:net';
import { RuntimeError } from '../errors.ts';

/** A place to listen. */
export interface PageAddress {
  readonly host: string;
  /** 0: any free one. */
  readonly port: number;
  /** Ports from `port` up that may be tried where others are taken: 1 where a person gave the port. */
  readonly tries: number;
}

/** Unassigned at IANA (from memory) and below the ports that systems give away by themselves. */
export const DEFAULT_PORT = 13_480;
/** So many gateways on one machine find a port by themselves. */
const DEFAULT_TRIES = 16;
const LOOPBACK = '127.0.0.1';

/** Reads `off`, a port, or a host and a port; null: no page. throws  RuntimeError 'options' */
export function parsePageAddress(text: string | undefined): PageAddress | null {
  if (text === undefined) return { host: LOOPBACK, port: DEFAULT_PORT, tries: DEFAULT_TRIES };
  if (text === 'off') return null;
  const match = /^(?:(\[[0-9a-fA-F:.]+\]|[A-Za-z0-9.-]+):)?(\d{1,5})$/.exec(text);
  const port = Number(match?.[2]);
  const host = match?.[1]?.replace(/^\[(.*)\]$/, '$1') ?? LOOPBACK;
  const isBracketed = match?.[1]?.startsWith('[') ?? false;
  if (match === null || port > 65_535 || (isBracketed && !isIPv6(host)))
    throw new RuntimeError(
      'options',
      `--page: expected off, a port, or host:port such as 127.0.0.1:${DEFAULT_PORT} or [::1]:${DEFAULT_PORT}, got "${text}"`,
    );
  return { host, port, tries: 1 };
}

/** Whether only this machine can reach a host's listener. */
export function isLoopback(host: string): boolean {
  return host === 'localhost' || host === '::1' || /^127\.\d+\.\d+\.\d+$/.test(host);
}

/** A host and a port as an address bar takes them. */
export function pageUrl(host: string, port: number): string {
  return `http://${isIPv6(host) ? `[${host}]` : host}:${port}/`;
}
