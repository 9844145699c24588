/** Tells as early as can be that a history spans more ticks than were to be held, looking at each reading once. */
import type { Block, Gathering } from './gathering.ts';

/** Watches what a reader gathers. */
export class SpanWatch {
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
  isPassed(gathering: Gathering): boolean {
    for (const block of gathering.blocks) {
      for (const time of block.times.view(this.#seen.get(block) ?? 0)) {
        if (time < this.#least) this.#least = time;
        if (time > this.#most) this.#most = time;
      }
      this.#seen.set(block, block.times.length);
    }
    const { floor } = Math;
    return floor(this.#most / this.#tickMs) - floor(this.#least / this.#tickMs) + 1 > this.#mostTicks;
  }
}
