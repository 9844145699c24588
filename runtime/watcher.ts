/** Who looks on from inside the gateway's process, such as its page. */
import type { ConnectionEvent } from './mqtt/connection.ts';

/** Called from the loop: must be quick and never throw. */
export interface Watcher {
  /** Ticks closed. forecasts  the messages just published, by signal; null: none were */
  tick(forecasts: readonly Uint8Array[] | null): void;
  /** The loop came round, so much later than it was due. */
  pulse(lateMs: number): void;
  /** The connection to the broker came, went or was refused something. */
  line(event: ConnectionEvent): void;
}
