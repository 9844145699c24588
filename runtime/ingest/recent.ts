/** The readings of the latest ticks, in memory, to warm a new bundle's filter with. */

/** A ring of ticks; see the file head. */
export class RecentTicks {
  readonly #values: Float64Array;
  readonly #channelCount: number;
  readonly #capacity: number;
  #firstTick = 0;
  #count = 0;

  /** capacity  most ticks kept */
  constructor(channelCount: number, capacity: number) {
    this.#channelCount = channelCount;
    this.#capacity = capacity;
    this.#values = new Float64Array(channelCount * capacity);
  }

  get count(): number {
    return this.#count;
  }

  /** Oldest tick kept; none where `count` is 0. */
  get firstTick(): number {
    return this.#firstTick;
  }

  /** A channel's value in a tick that is kept; NaN missing. */
  at(tick: number, channel: number): number {
    return this.#values[(tick % this.#capacity) * this.#channelCount + channel]!;
  }

  /** Takes one tick in; after a tick left out it starts afresh. `values` (nc) in units, NaN missing. */
  push(tick: number, values: Float64Array): void {
    if (this.#count > 0 && tick !== this.#firstTick + this.#count) this.#count = 0;
    if (this.#count === 0) this.#firstTick = tick;
    if (this.#count === this.#capacity) {
      this.#firstTick++;
      this.#count--;
    }
    this.#values.set(values, (tick % this.#capacity) * this.#channelCount);
    this.#count++;
  }

  /** Every tick kept, oldest first; `values` is a view that the next push may overwrite. */
  forEach(visit: (tick: number, values: Float64Array) => void): void {
    for (let tick = this.#firstTick; tick < this.#firstTick + this.#count; tick++) {
      const at = (tick % this.#capacity) * this.#channelCount;
      visit(tick, this.#values.subarray(at, at + this.#channelCount));
    }
  }
}
