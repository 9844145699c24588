/** What a gateway reaches of the world beside its broker. */
import type { Clock } from './clock.ts';
import type { Disk } from './disk.ts';
import type { Log } from './log.ts';

/** The world outside, passed in. */
export interface GatewayPorts {
  readonly clock: Clock;
  readonly disk: Disk;
  readonly log: Log;
  /** 8 bytes for a fresh data folder; random unless given. */
  readonly stream?: Uint8Array;
  /** Told of what fails where nobody waits for it; the gateway then does nothing more. Absent: it is thrown. */
  readonly onFault?: (error: unknown) => void;
  /** Largest first wait before reconnecting, ms; default as in the connection. */
  readonly firstRetryMs?: number;
  /** How long an MQTT 5 broker waits before it publishes the will; default 10, so that a short cut is no loss. */
  readonly willDelaySeconds?: number;
}
