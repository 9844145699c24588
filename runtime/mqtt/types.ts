/** What passes between a lasting connection and those who use it. */
import type { BackOffOptions } from './back-off.ts';
import type { TlsOptions } from './stream.ts';

/** One message to publish. */
export interface Outgoing {
  readonly topic: string;
  readonly payload: Uint8Array | string;
  readonly qos: 0 | 1;
  readonly retain: boolean;
  /** The broker drops it after so many seconds; MQTT 5 alone. */
  readonly expirySeconds?: number;
  /** MQTT 5 alone. */
  readonly contentType?: string;
  /** Where an answer is wanted, and the asker's mark on it; MQTT 5 alone. */
  readonly responseTopic?: string;
  readonly correlationData?: Uint8Array;
}

/** What the broker publishes for us when we vanish. */
export interface Will extends Outgoing {
  /** Waited by the broker before it speaks, so that a short cut does not look like a loss; MQTT 5 alone. Default 0. */
  readonly delaySeconds?: number;
}

/** What is worth knowing of a message beside its bytes. */
export interface IncomingPacket {
  readonly qos: number;
  readonly retain: boolean;
  readonly duplicate: boolean;
  /** Where the sender wants an answer, and its mark on it; null on MQTT 3.1.1, and where it says nothing. */
  readonly responseTopic: string | null;
  readonly correlationData: Uint8Array | null;
}

/** What the connection is doing, for logs and health. */
export type ConnectionEvent =
  | { readonly kind: 'connected'; readonly protocol: 4 | 5; readonly sessionPresent: boolean }
  | { readonly kind: 'lost'; readonly reason: string; readonly retryMs: number }
  | { readonly kind: 'refused-subscription'; readonly filter: string; readonly reason: string }
  | { readonly kind: 'taken-over'; readonly count: number };

/** How to connect, and who hears of it. */
export interface ConnectionOptions {
  /** mqtt:// or mqtts://; user and password in it are used unless given apart. */
  readonly url: string;
  readonly clientId: string;
  /** 'auto': MQTT 5, and 3.1.1 where the broker refuses it. */
  readonly protocol: 'auto' | 4 | 5;
  readonly username?: string | null;
  readonly password?: string | null;
  readonly tls?: TlsOptions;
  readonly will?: Will;
  /** Seconds, default 30. A dead link is found within 1.5 of these. */
  readonly keepAliveSeconds?: number;
  /** How long the broker keeps what arrives for us while away; 0 (default): a clean session each time. */
  readonly sessionExpirySeconds?: number;
  /** Largest packet accepted from the broker and offered to it, bytes. Default 1 MiB. */
  readonly maxPacketBytes?: number;
  readonly backOff?: Partial<BackOffOptions>;
  /**
   * Called for every message before it is acknowledged; must not throw and must be quick. A message of QoS 1 is
   * acknowledged when the promise resolves, if there is one, and never before those that came ahead of it; where the line
   * breaks first the broker sends it again. Later messages do not wait for it.
   */
  readonly onMessage?: (topic: string, payload: Uint8Array, packet: IncomingPacket) => Promise<void> | void;
  readonly onState?: (event: ConnectionEvent) => void;
  /** In [0, 1); default Math.random. */
  readonly random?: () => number;
}

/** A connection that keeps itself up. */
export interface Connection {
  readonly isConnected: boolean;
  /** Protocol of the present connection, or of the last one; null before the first. */
  readonly protocol: 4 | 5 | null;
  /** Most QoS 1 messages that should be under way at once: the broker's receive maximum, at most 16. */
  readonly window: number;
  /** Bytes handed over and not yet taken by the system. */
  readonly backlogBytes: number;
  /**
   * Resolves when the broker process has it (QoS 1) or the bytes are handed to the system (QoS 0).
   *
   * throws  RuntimeError 'not-connected', 'too-large', or 'broker' (refused, or lost before the answer: outcome unknown)
   */
  publish(message: Outgoing): Promise<void>;
  /**
   * Subscribes now or at the next connect, and again after every reconnect.
   *
   * patienceMs  how long to wait for the broker's answer; without it, for ever
   * throws      RuntimeError 'broker' if the broker refuses a filter or does not answer in time
   */
  subscribe(filters: readonly string[], qos?: 0 | 1, patienceMs?: number): Promise<void>;
  /**
   * Waits for the first connect; rejects at the first failed attempt or after `timeoutMs`.
   *
   * throws  RuntimeError 'broker' with one plain sentence
   */
  firstConnect(timeoutMs: number): Promise<void>;
  /** Says goodbye (no will is sent) and stops for good; `force` cuts the line, so that the broker sends the will. */
  end(force?: boolean): Promise<void>;
}
