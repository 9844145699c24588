/**
 * Reaching a broker from a command: connected within a time limit or refused in one sentence that says what to check.
 */
import { type Connection, type ConnectionOptions, openConnection, parseBrokerUrl } from '@stillwell/runtime/mqtt';
import { TrainError } from './errors.ts';

/** Options of a command that talks to a broker. */
export interface BrokerOptions {
  /** mqtt://[user:password@]host[:port] or mqtts://… */
  readonly url: string;
  readonly clientId: string;
  readonly connectTimeoutMs?: number;
  readonly sessionExpirySeconds?: number;
  readonly onMessage: NonNullable<ConnectionOptions['onMessage']>;
  readonly onState?: NonNullable<ConnectionOptions['onState']>;
}

const CONNECT_TIMEOUT_MS = 15_000;

/**
 * Connects, or refuses within the time limit; afterwards the connection keeps itself up.
 *
 * throws  TrainError 'broker' when the address is no broker URL, nothing answers, or the broker refuses
 */
export async function connectBroker(options: BrokerOptions): Promise<Connection> {
  const {
    url,
    clientId,
    connectTimeoutMs = CONNECT_TIMEOUT_MS,
    sessionExpirySeconds = 0,
    onMessage,
    onState,
  } = options;
  checkBroker(url);
  const connection = openConnection({
    url,
    clientId,
    protocol: 'auto',
    sessionExpirySeconds,
    onMessage,
    ...(onState ? { onState } : {}),
  });
  try {
    await connection.firstConnect(connectTimeoutMs);
  } catch (cause) {
    await connection.end(true);
    throw brokerError(cause);
  }
  return connection;
}

/**
 * Refuses what is no broker's address, before anything is made or opened for it.
 *
 * throws  TrainError 'broker'
 */
export function checkBroker(url: string): void {
  try {
    parseBrokerUrl(url);
  } catch (cause) {
    throw new TrainError('broker', `--broker: ${(cause as Error).message}`, { cause });
  }
}

/** A refusal of the connection as one of ours. */
export function brokerError(cause: unknown): TrainError {
  return new TrainError('broker', (cause as Error).message, { cause });
}

/**
 * Subscribes, or refuses within the time limit; `connection` is ended then.
 *
 * throws  TrainError 'broker' when the broker refuses a filter or does not answer
 */
export async function subscribeTo(connection: Connection, filters: readonly string[]): Promise<void> {
  try {
    await connection.subscribe(filters, 1, CONNECT_TIMEOUT_MS);
  } catch (cause) {
    await connection.end(true);
    throw brokerError(cause);
  }
}

/** A client id that no other process uses; MQTT 3.1.1 promises 23 characters. */
export function clientIdFor(what: string): string {
  return `sw-${what}-${Math.floor(Math.random() * 2 ** 32).toString(36)}`;
}
