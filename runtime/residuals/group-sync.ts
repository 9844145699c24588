/**
 * One sync of the journal for many readings. Who waits here is told once all that was written down before is durable: the
 * sync comes a little after the first of a group, so that a burst costs one. It comes at once when many wait, or when
 * a message came right on the heels of the last group: the sender then holds back more until we acknowledge.
 */
import type { Clock } from '../clock.ts';

/** What syncs, and how soon. */
export interface GroupSyncOptions {
  readonly clock: Clock;
  /** Makes durable what was written down so far. */
  readonly sync: () => Promise<void>;
}

/** A group gathers so long; with nobody pressing, syncs come no closer. */
const GATHER_MS = 200;
/** Half the messages that mosquitto leaves unacknowledged by default. */
const MANY = 10;
/** Whatever comes so soon behind an acknowledgement has been waiting for it. */
const ON_THE_HEELS_MS = 5;
/** A disk that takes longer is not waited for: the broker would take us for dead, and forecasts would stop. */
const PATIENCE_MS = 5000;

interface Group {
  readonly done: Promise<void>;
  readonly release: () => void;
  count: number;
}

/** See the file head. */
export class GroupSync {
  readonly #options: GroupSyncOptions;
  #gathering: Group | null = null;
  #cancelTimer: (() => void) | null = null;
  #isSyncing = false;
  #releasedAt = Number.NEGATIVE_INFINITY;
  #startedAt = Number.NEGATIVE_INFINITY;
  #count = 0;

  constructor(options: GroupSyncOptions) {
    this.#options = options;
  }

  /** Syncs so far. */
  get count(): number {
    return this.#count;
  }

  /** Ms since the last sync began. */
  get ageMs(): number {
    return this.#options.clock.monotonic() - this.#startedAt;
  }

  /** Resolves when all that is written down by now is durable, or after five seconds. Never rejects. */
  wait(): Promise<void> {
    const isNew = this.#gathering === null;
    this.#gathering ??= this.#createGroup();
    const group = this.#gathering;
    group.count++;
    const isUrgent = group.count === MANY || this.#options.clock.monotonic() - this.#releasedAt < ON_THE_HEELS_MS;
    if (!this.#isSyncing && (isNew || isUrgent)) this.#begin(isUrgent ? 0 : GATHER_MS);
    return group.done;
  }

  /** Syncs now, for what nobody waits for; nothing while one runs. */
  now(): void {
    if (!this.#isSyncing) void this.#run();
  }

  /** Lets everybody go: what was written down has been made durable elsewhere. */
  release(): void {
    this.#cancelTimer?.();
    this.#cancelTimer = null;
    this.#gathering?.release();
    this.#gathering = null;
  }

  #begin(afterMs: number): void {
    this.#cancelTimer?.();
    // Not in the midst of what has just arrived: the rest of it may come along.
    this.#cancelTimer = this.#options.clock.after(afterMs, () => void this.#run());
  }

  async #run(): Promise<void> {
    const group = this.#gathering;
    this.#cancelTimer?.();
    this.#cancelTimer = null;
    this.#gathering = null;
    this.#isSyncing = true;
    this.#startedAt = this.#options.clock.monotonic();
    this.#count++;
    await this.#options.sync();
    this.#isSyncing = false;
    if (group !== null) {
      this.#releasedAt = this.#options.clock.monotonic();
      group.release();
    }
    const next = this.#gathering as Group | null;
    if (next !== null) this.#begin(next.count >= MANY ? 0 : GATHER_MS);
  }

  #createGroup(): Group {
    let release = (): void => {};
    const done = new Promise<void>((resolve) => {
      release = resolve;
    });
    const cancelPatience = this.#options.clock.after(PATIENCE_MS, release);
    return {
      done,
      count: 0,
      release: () => {
        cancelPatience();
        release();
      },
    };
  }
}
