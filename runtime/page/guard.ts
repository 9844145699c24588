/**
 * Which requests are not answered. A page without a password on a gateway must not become readable for whatever website
 * somebody on site has open: such a site can point a name of its own at this machine (DNS rebinding), which the host that the
 * browser names gives away, or send requests across sites, which the browser says in Sec-Fetch-Site.
 */
import { isIP } from 'node:net';

/** The part of a request that decides. */
export interface Asked {
  readonly method: string;
  readonly headers: Readonly<Record<string, string | readonly string[] | undefined>>;
}

/** A status and one sentence for whoever asked. */
export interface Refusal {
  readonly status: 400 | 403 | 405 | 421;
  readonly text: string;
}

/** Why a request is refused; null: it may be answered. names  host names this machine goes by, in lower case */
export function refusalOf({ method, headers }: Asked, names: ReadonlySet<string>): Refusal | null {
  if (method !== 'GET' && method !== 'HEAD')
    return { status: 405, text: 'This page only shows: GET and HEAD are answered, nothing can be changed here.' };
  if (headers['transfer-encoding'] !== undefined || (headers['content-length'] ?? '0') !== '0')
    return { status: 400, text: 'A request without content is expected.' };
  const host = hostName(String(headers.host ?? ''));
  if (host === null || !(isIP(host) !== 0 || names.has(host)))
    return {
      status: 421,
      text: 'This gateway does not go by that name: ask for it by its address, as localhost, or by the machine’s own name.',
    };
  const isNavigation = headers['sec-fetch-mode'] === 'navigate';
  if (headers['sec-fetch-site'] === 'cross-site' && !isNavigation)
    return { status: 403, text: 'Not for pages of other sites.' };
  return null;
}

/** RFC 9110, 7.2: a host and an optional port; in lower case, without brackets and a final dot. Null: malformed. */
function hostName(header: string): string | null {
  const match = /^(?:\[([0-9A-Fa-f:.]+)\]|([A-Za-z0-9._-]+))(?::\d{0,5})?$/.exec(header);
  const name = match?.[1] ?? match?.[2];
  return name === undefined ? null : name.toLowerCase().replace(/\.$/, '');
}

/** Names that a page on `host` may be asked for by; addresses always may, as no foreign name stands behind them. */
export function ownNames(host: string, machine: string, isLocal: boolean): ReadonlySet<string> {
  const own = machine.toLowerCase();
  return new Set(['localhost', ...(isLocal ? [] : [host.toLowerCase(), own, `${own}.local`])]);
}
