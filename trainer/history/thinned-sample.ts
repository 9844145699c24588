/**
 * A sample of a stream of values in fixed memory: every value at first; whenever it is full, every second one is let go and
 * half as many are taken from then on. Evenly spread over the stream, and the same for the same stream.
 */
const MOST = 2048;

/** The sample as plain data. */
export interface ThinnedState {
  readonly every: number;
  readonly seen: number;
  readonly values: readonly number[];
}

/** Gathers the sample; NaN is passed over. */
export class ThinnedSample {
  #values: number[] = [];
  #every = 1;
  #seen = 0;

  add(values: Float64Array): void {
    for (let i = 0; i < values.length; i++) {
      const value = values[i] as number;
      if (Number.isNaN(value)) continue;
      if (this.#seen++ % this.#every !== 0) continue;
      this.#values.push(value);
      if (this.#values.length < MOST) continue;
      this.#values = this.#values.filter((_, k) => k % 2 === 0);
      this.#every *= 2;
    }
  }

  values(): Float64Array {
    return Float64Array.from(this.#values);
  }

  state(): ThinnedState {
    return { every: this.#every, seen: this.#seen, values: this.#values };
  }

  restore({ every, seen, values }: ThinnedState): void {
    this.#every = every;
    this.#seen = seen;
    this.#values = [...values];
  }
}
