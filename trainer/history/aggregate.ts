/**
 * How the readings of one tick become one value. Readings come in order of time; a counter's increment belongs to the
 * tick of the later reading.
 */
import { type Aggregate, counterIncrease } from '@stillwell/protocol';

/** What is kept of the current tick and, for counters, of the reading before it. */
export class TickValue {
  readonly #how: Aggregate;
  #count = 0;
  #value = 0;
  readonly #wrap: number | null;
  #counter = Number.NaN;
  #counterTick = Number.NaN;

  /** wrap  where a counter begins again; null where that is not known */
  constructor(how: Aggregate, wrap: number | null = null) {
    this.#how = how;
    this.#wrap = wrap;
  }

  /** Adds a reading of tick `tick`. */
  add(tick: number, value: number): void {
    if (this.#how === 'increment') {
      this.#addCounter(tick, value);
      return;
    }
    const isFirst = this.#count++ === 0;
    if (isFirst || this.#how === 'last') this.#value = value;
    else if (this.#how === 'min') this.#value = Math.min(this.#value, value);
    else if (this.#how === 'max') this.#value = Math.max(this.#value, value);
    else this.#value += value;
  }

  /** Across missing ticks the increment belongs to no one tick. */
  #addCounter(tick: number, value: number): void {
    const increase = counterIncrease(this.#counter, value, this.#wrap);
    if (tick - this.#counterTick <= 1 && !Number.isNaN(increase)) {
      this.#value += increase;
      this.#count++;
    }
    this.#counter = value;
    this.#counterTick = tick;
  }

  /** The counter reading that the next one is held against, and its tick: what a later run of ticks must know. */
  get carried(): readonly [value: number, tick: number] {
    return [this.#counter, this.#counterTick];
  }

  /** Goes on from what an earlier run of ticks carried over. */
  carry([value, tick]: readonly [number, number]): void {
    this.#counter = value;
    this.#counterTick = tick;
  }

  /** The tick's value, NaN where it had none; then forgets it. */
  close(): number {
    const count = this.#count;
    const value = this.#how === 'mean' && count > 0 ? this.#value / count : this.#value;
    this.#count = 0;
    this.#value = 0;
    return count > 0 ? value : Number.NaN;
  }
}
