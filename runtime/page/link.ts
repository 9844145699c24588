/** The connection to the broker, as it has been told of. */
import type { ConnectionEvent } from '../mqtt/connection.ts';
import type { GatewayFacts } from './told.ts';

/** What is said of it. */
export type LinkFacts = Omit<GatewayFacts['link'], 'reconnects'>;

/** See the file head. */
export class Link {
  #isConnected = false;
  #sinceMs: number;
  #protocol: string | null = null;
  #reason: string | null = null;

  /** nowMs  of a clock that never steps back */
  constructor(nowMs: number) {
    this.#sinceMs = nowMs;
  }

  /** Takes an event in. */
  take(event: ConnectionEvent, nowMs: number): void {
    if (event.kind === 'connected') {
      this.#turn(true, nowMs);
      this.#protocol = event.protocol === 5 ? '5' : '3.1.1';
    } else if (event.kind === 'refused-subscription') this.#reason = `${event.filter} refused: ${event.reason}`;
    else if (event.kind === 'taken-over') this.#reason = `another client took this gateway’s place (${event.count})`;
    else {
      this.#turn(false, nowMs);
      this.#reason = event.reason;
    }
  }

  facts(nowMs: number): LinkFacts {
    return {
      connected: this.#isConnected,
      for_s: Math.max(0, (nowMs - this.#sinceMs) / 1000),
      protocol: this.#protocol,
      reason: this.#reason,
    };
  }

  /** Attempts that fail one after another are one loss. */
  #turn(isConnected: boolean, nowMs: number): void {
    if (this.#isConnected === isConnected) return;
    this.#isConnected = isConnected;
    this.#sinceMs = nowMs;
  }
}
