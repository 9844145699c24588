/** The gateway's connection to its broker, made from what it was started with; and what is said of it in the log. */
import type { GatewayConfig } from './config.ts';
import type { Log } from './log.ts';
import { TAKE_OVERS_TO_A_FIGHT } from './mqtt/back-off.ts';
import {
  type Connection,
  type ConnectionEvent,
  type ConnectionOptions,
  openConnection,
  type Will,
} from './mqtt/connection.ts';
import type { GatewayPorts } from './ports.ts';

/** How long the broker keeps what arrives while the gateway is away. */
const SESSION_EXPIRY_SECONDS = 3600;

/** Opens it. */
export function openBrokerLine(
  { broker, site, gateway }: GatewayConfig,
  { firstRetryMs }: GatewayPorts,
  will: Will,
  handlers: Required<Pick<ConnectionOptions, 'onMessage' | 'onState'>>,
): Connection {
  return openConnection({
    url: broker.url,
    clientId: `stillwell-${site.site}-${gateway}`,
    protocol: broker.protocol,
    username: broker.username,
    password: broker.password,
    tls: broker.tls,
    sessionExpirySeconds: SESSION_EXPIRY_SECONDS,
    will,
    ...(firstRetryMs === undefined ? {} : { backOff: { firstMs: firstRetryMs } }),
    ...handlers,
  });
}

/** One line of the log for what happened to it. */
export function logBrokerLine(log: Log, event: ConnectionEvent): void {
  if (event.kind === 'connected') log.info(`connected to the broker, MQTT ${event.protocol === 5 ? '5' : '3.1.1'}`);
  else if (event.kind === 'lost')
    log.warn(`broker: ${event.reason}; next attempt in ${(event.retryMs / 1000).toFixed(1)} s`);
  else if (event.kind === 'refused-subscription')
    log.warn(`the broker refused to subscribe ${event.filter}: ${event.reason}`);
  else log.warn(`another client took this gateway's place at the broker (${event.count})`);
}

/** How often another client took this gateway's place, and whether the two fight for it now. */
export class TakeOvers {
  /** Since the start. */
  count = 0;
  /** In words; null: no fight. */
  fight: string | null = null;

  take(event: ConnectionEvent): void {
    if (event.kind === 'connected') this.fight = null;
    if (event.kind !== 'taken-over') return;
    this.count++;
    if (event.count >= TAKE_OVERS_TO_A_FIGHT) this.fight = "another client uses this gateway's client id";
  }
}
