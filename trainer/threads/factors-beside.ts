/**
 * The factors of a site while it is fitted, gathered on a second thread: the same bytes as FactorsKeeper's, which does the
 * work there. The main thread runs ahead by a few chunks at most, so that memory stays bounded.
 */
import type { Site } from '@stillwell/protocol';
import { earlierOf } from '../factors/earlier.ts';
import type { Factors } from '../factors/factors.ts';
import { decodeFactors } from '../factors/file.ts';
import type { OlderSink } from '../history/older.ts';
import type { Series } from '../history/series.ts';
import type { Earlier } from '../identify/earlier.ts';
import type { SecondThread } from './second-thread.ts';

/** Bytes of chunks that may wait to be taken in; with channels by the dozen each is some megabytes. */
const MOST_WAITING_BYTES = 4 << 20;
const LEAST_WAITING = 2;

/** Begins anew with each. */
export class FactorsBeside {
  readonly #thread: SecondThread;
  /** The oldest first. */
  readonly #waiting: Promise<unknown>[] = [];
  /** Asked for as soon as nothing follows, long before it is wanted. */
  #earlier: Promise<Uint8Array | null> | null = null;

  /** From nothing, or on from factors of the same site, whose half-life stays. */
  constructor(thread: SecondThread, site: Site, halfLifeTicks: number | null, start: Factors | null = null) {
    this.#thread = thread;
    this.#waiting.push(thread.ask('begin', { site, halfLifeTicks, start }));
  }

  /** Takes in what is older. */
  sink(): OlderSink {
    return {
      take: (older) => this.#take(older),
      snapshot: () => this.#thread.ask('snapshot', null),
      restore: async (bytes) => {
        await this.#thread.ask('restore', bytes);
      },
      end: () => {
        this.#earlier = this.#thread.ask('earlier', null);
      },
    };
  }

  /** What is in so far, for learning; null where nothing is. */
  earlier(): Promise<Earlier | null> {
    const bytes = this.#earlier ?? this.#thread.ask('earlier', null);
    const earlier = bytes.then((file) => file && earlierOf(decodeFactors(file, 'the second thread'), file));
    // Where the fit refuses before it waits for it, nobody does.
    earlier.catch(() => {});
    return earlier;
  }

  /**
   * Takes in the window and gives the file's bytes; null where the site goes without. The thread then ends itself, with all
   * its memory, unless it `goesOn` with something else.
   */
  close(window: Series, goesOn = false): Promise<Uint8Array | null> {
    const bytes = this.#thread.ask('close', window);
    if (!goesOn) this.#thread.ask('end', null);
    return bytes;
  }

  async #take(older: Series): Promise<void> {
    this.#waiting.push(this.#thread.ask('take', older));
    const bytes = 8 * older.ticks * older.values.length;
    const most = Math.max(LEAST_WAITING, Math.floor(MOST_WAITING_BYTES / bytes));
    while (this.#waiting.length > most) await this.#waiting.shift();
  }
}
