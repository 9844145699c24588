/**
 * The factors of a site while it is fitted: what is older than the window streams in and is learned from; then the window
 * goes in as well, for the next refit. A site of very many signals goes without, since products of all pairs at all lags
 * would outgrow its history.
 */
import type { Site } from '@stillwell/protocol';
import type { OlderSink } from '../history/older.ts';
import type { Series } from '../history/series.ts';
import type { Earlier } from '../identify/earlier.ts';
import { earlierOf } from './earlier.ts';
import type { Factors } from './factors.ts';
import { encodeFactors } from './file.ts';
import { FactorsGatherer } from './gather.ts';
import { gridOf } from './moments.ts';
import { shapeOf } from './site-shape.ts';

/** Bytes of lagged products beyond which a site goes without factors. */
const MOST_BYTES = 128 * 1024 * 1024;

/** Name of the file beside the candidate. */
export const FACTORS_FILE = 'factors.swf';

/** One site's factors over one fit. */
export class FactorsKeeper {
  readonly #site: Site;
  readonly #halfLifeTicks: number | null;
  #gatherer: FactorsGatherer | null;

  /** From nothing, or on from factors of the same site, whose half-life stays. */
  constructor(site: Site, halfLifeTicks: number | null, start: Factors | null = null) {
    this.#site = site;
    this.#halfLifeTicks = halfLifeTicks;
    this.#gatherer = start !== null || isAffordable(site) ? new FactorsGatherer(start ?? this.#shape(), start) : null;
  }

  /** Takes in what is older. */
  sink(): OlderSink {
    return {
      take: (older) => this.#gatherer?.take(older),
      snapshot: () => this.snapshot(),
      restore: (bytes) => this.restore(bytes),
    };
  }

  /** All that is in, to go on from; no bytes where the site goes without. */
  snapshot(): Uint8Array {
    return this.#gatherer?.snapshot() ?? new Uint8Array(0);
  }

  /** Goes on from a snapshot. */
  restore(bytes: Uint8Array): void {
    if (this.#gatherer !== null) this.#gatherer = FactorsGatherer.restore(this.#shape(), bytes);
  }

  /** What is in so far, for learning; null where nothing is. */
  earlier(): Earlier | null {
    const factors = this.#gatherer?.end();
    return holds(factors) ? earlierOf(factors) : null;
  }

  /** The same as a file has it, for another thread. */
  earlierBytes(): Uint8Array | null {
    const factors = this.#gatherer?.lend();
    return holds(factors) ? encodeFactors(factors) : null;
  }

  /** Takes in the window and gives the file's bytes; null where the site goes without. */
  close(window: Series): Uint8Array | null {
    if (this.#gatherer === null) return null;
    this.#gatherer.take(window);
    return encodeFactors(this.#gatherer.lend());
  }

  #shape() {
    return shapeOf(this.#site, this.#halfLifeTicks);
  }
}

function holds(factors: Factors | undefined): factors is Factors {
  return factors !== undefined && factors.ticks > 0;
}

/** What a person should know where a history is longer than what was learned from. */
export function factorsNotes(site: Site, isLong: boolean): string[] {
  if (!isLong || isAffordable(site)) return [];
  const count = site.signals.length + site.inputs.length;
  return [
    `${count} signals and inputs are too many for factors, so only the newest part of the history was learned from. ` +
      'Dividing them among several site files mends this.',
  ];
}

/** Whether a site is to have factors at all. */
export function isAffordable(site: Site): boolean {
  const shape = shapeOf(site, null);
  return 8 * shape.names.length ** 2 * gridOf(shape).lags.length <= MOST_BYTES;
}
