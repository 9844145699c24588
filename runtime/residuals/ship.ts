/**
 * Sends waiting segments, oldest first, a few at a time, and again until a receipt names each. A broker's acknowledgement
 * counts for nothing here: it says that a broker process has the bytes, not that they are safe.
 */
import type { Clock } from '../clock.ts';
import type { RuntimeError } from '../errors.ts';
import type { Spool, Waiting } from './spool.ts';

/** What a shipper is made of. */
export interface ShipperOptions {
  readonly spool: Spool;
  readonly clock: Clock;
  /** Hands one segment to the broker; rejects with a RuntimeError. */
  readonly send: (segment: Uint8Array) => Promise<void>;
  /** Most segments sent and not yet confirmed. */
  readonly window: () => number;
  /** First wait for a receipt, ms; doubles with each attempt up to `capMs`. Default 30000 and 600000. */
  readonly resendMs?: number;
  readonly capMs?: number;
}

/** Counted since the start. */
export interface ShipCounts {
  readonly sent: number;
  readonly resent: number;
  readonly confirmed: number;
  readonly conflicts: number;
  /** Set aside until the next start: too large for this broker, or in conflict at the desk. */
  readonly parked: number;
}

interface Attempt {
  tries: number;
  sentAt: number;
  isUnderWay: boolean;
  isParked: boolean;
}

/** Reconnects in quick succession do not resend what went out a moment ago. */
const SETTLE_MS = 5000;

/** See the file head. */
export class Shipper {
  readonly #options: ShipperOptions;
  readonly #attempts = new Map<string, Attempt>();
  readonly #counts = { sent: 0, resent: 0, confirmed: 0, conflicts: 0, parked: 0 };
  /** Segments from this number on are not released yet: their boundary is not durable. */
  #heldStream = '';
  #heldFrom = Number.POSITIVE_INFINITY;
  #isConnected = false;

  constructor(options: ShipperOptions) {
    this.#options = options;
  }

  get counts(): ShipCounts {
    return this.#counts;
  }

  /** Only segments of this stream below `number` may go; other streams are history and may. */
  release(stream: string, number: number): void {
    this.#heldStream = stream;
    this.#heldFrom = number;
    this.poke();
  }

  /** On every connect: what is unconfirmed goes again soon, since the broker may have forgotten it. */
  connected(): void {
    this.#isConnected = true;
    const now = this.#options.clock.monotonic();
    for (const attempt of this.#attempts.values()) {
      attempt.isUnderWay = false;
      attempt.tries = Math.min(attempt.tries, 1);
      attempt.sentAt = Math.min(attempt.sentAt, now - this.#wait(1) + SETTLE_MS);
    }
    this.poke();
  }

  lost(): void {
    this.#isConnected = false;
  }

  /** Sends what is due. Cheap; call it often. */
  poke(): void {
    if (!this.#isConnected) return;
    let room = this.#options.window();
    const due: Waiting[] = [];
    for (const entry of this.#options.spool.waiting) {
      if (room <= 0) break;
      if (entry.stream === this.#heldStream && entry.number >= this.#heldFrom) continue;
      const attempt = this.#attemptOf(entry);
      if (attempt.isParked) continue;
      room--;
      if (!attempt.isUnderWay && this.#isDue(attempt)) due.push(entry);
    }
    for (const entry of due) this.#send(entry, this.#attemptOf(entry));
  }

  /**
   * Takes in what a receipt says of one segment.
   *
   * returns  as Spool.confirm
   */
  receipt(stream: string, number: number, hash: Uint8Array): 'confirmed' | 'unknown' | 'conflict' {
    const outcome = this.#options.spool.confirm(stream, number, hash);
    const key = `${stream}-${number}`;
    if (outcome === 'confirmed') {
      this.#counts.confirmed++;
      this.#attempts.delete(key);
    } else if (outcome === 'conflict') {
      this.#counts.conflicts++;
      this.#park(this.#attemptOf({ stream, number, bytes: 0 }));
    }
    return outcome;
  }

  #isDue(attempt: Attempt): boolean {
    return attempt.tries === 0 || this.#options.clock.monotonic() - attempt.sentAt >= this.#wait(attempt.tries);
  }

  #wait(tries: number): number {
    const { resendMs = 30_000, capMs = 600_000 } = this.#options;
    return Math.min(capMs, resendMs * 2 ** Math.min(tries - 1, 20));
  }

  #send(entry: Waiting, attempt: Attempt): void {
    const isAgain = attempt.tries > 0;
    attempt.tries++;
    attempt.sentAt = this.#options.clock.monotonic();
    let bytes: Uint8Array | null;
    try {
      bytes = this.#options.spool.read(entry);
    } catch {
      // The disk does not give it now; asked again as if it had been sent and lost.
      return;
    }
    if (bytes === null) return;
    if (isAgain) this.#counts.resent++;
    attempt.isUnderWay = true;
    this.#options
      .send(bytes)
      .then(() => {
        this.#counts.sent++;
      })
      .catch((error: RuntimeError) => {
        if (error.code === 'too-large') this.#park(attempt);
      })
      .finally(() => {
        attempt.isUnderWay = false;
      });
  }

  #park(attempt: Attempt): void {
    if (attempt.isParked) return;
    attempt.isParked = true;
    this.#counts.parked++;
    this.#options.spool.breakChain();
  }

  #attemptOf(entry: Waiting): Attempt {
    const key = `${entry.stream}-${entry.number}`;
    let attempt = this.#attempts.get(key);
    if (attempt === undefined) {
      attempt = { tries: 0, sentAt: Number.NEGATIVE_INFINITY, isUnderWay: false, isParked: false };
      this.#attempts.set(key, attempt);
    }
    return attempt;
  }
}
