/**
 * Reaching a broker from a command: connected within a time limit or refused in one sentence that says what to check.
 */
import { type Connection, type ConnectionOptions, openConnection } from '@stillwell/runtime/mqtt';
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
  const { url, clientId, connectTimeoutMs = CONNECT_TIMEOUT_MS, sessionExpirySeconds = 0, onMessage, onState } = options;
  let connection: Connection;
  try {
    connection = openConnection({
      url,
      clientId,
      protocol: 'auto',
      sessionExpirySeconds,
      onMessage,
      ...(onState ? { onState } : {}),
    });
  } catch (cause) {
    throw new TrainError('broker', `--broker: ${(cause as Error).message}`, { cause });
  }
  try {
    await connection.firstConnect(connectTimeoutMs);
  } catch (cause) {
    await connection.end(true);
    throw brokerError(cause);
  }
  return connection;
}

/** A refusal of the connection as one of ours, with what to check. */
export function brokerError(cause: unknown): TrainError {
  const message = (cause as Error).message;
  return new TrainError('broker', `${message}; check address and port, that the broker runs, and user and password`, {
    cause,
  });
}

/** A client id that no other process uses; MQTT 3.1.1 promises 23 characters. */
export function clientIdFor(what: string): string {
  return `sw-${what}-${Math.floor(Math.random() * 2 ** 32).toString(36)}`;
}
