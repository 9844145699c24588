/** Tells as early as can be that a history is more than was to be held in memory. */
import type { Block, Gathering } from './gathering.ts';

/** Looks at what a reader gathers. */
export interface Watch {
  /** True once it is too much. `share` is what was read of the only file so far, where its rows are spread evenly as a rule. */
  isPassed(gathering: Gathering, share?: number): boolean;
}

/** Passed by a number of values; keeps what was gathered until then. */
export class SizeWatch implements Watch {
  readonly #mostValues: number;
  gathered: Gathering | null = null;

  constructor(mostValues: number) {
    this.#mostValues = mostValues;
  }

  isPassed(gathering: Gathering): boolean {
    this.gathered = gathering;
    let values = 0;
    for (const block of gathering.blocks) values += block.times.length * (1 + block.values.filter(Boolean).length);
    return values > this.#mostValues;
  }
}

/** How much too long a history must seem from the first rows of a file for these to settle it. */
const BY_FAR = 2;

/**
 * Passed by a span of ticks; looks at each reading once. A file that will pass it by far, if it goes on as it began, passes at
 * once: little is read twice then, and where it does not go on so, the way of long histories serves short ones as well.
 */
export class SpanWatch implements Watch {
  readonly #tickMs: number;
  readonly #mostTicks: number;
  readonly #seen = new Map<Block, number>();
  #least = Number.POSITIVE_INFINITY;
  #most = Number.NEGATIVE_INFINITY;

  constructor(tickMs: number, mostTicks: number) {
    this.#tickMs = tickMs;
    this.#mostTicks = mostTicks;
  }

  /** True once the readings so far span more ticks. */
  isPassed(gathering: Gathering, share = 1): boolean {
    for (const block of gathering.blocks) {
      for (const time of block.times.view(this.#seen.get(block) ?? 0)) {
        if (time < this.#least) this.#least = time;
        if (time > this.#most) this.#most = time;
      }
      this.#seen.set(block, block.times.length);
    }
    const { floor } = Math;
    const ticks = floor(this.#most / this.#tickMs) - floor(this.#least / this.#tickMs) + 1;
    return ticks > this.#mostTicks || (gathering.blocks.length === 1 && ticks > BY_FAR * this.#mostTicks * share);
  }
}
