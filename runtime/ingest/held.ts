/**
 * Readings without a time of their own that came while the machine's clock was not set: their arrival on the monotonic
 * clock is known, and becomes a time once the clock is set. Bounded: the oldest make way. In memory alone, since what the
 * monotonic clock says means nothing after a restart.
 */

/** Enough for minutes of a busy site; 20 bytes each, and none where the clock is set from the start. */
const MOST_HELD = 16_384;

/** See the file head. */
export class HeldReadings {
  /** Monotonic ms, set by whoever takes the readings in. */
  nowMs = Number.NaN;
  readonly #most: number;
  #channels: Uint32Array | null = null;
  #values = new Float64Array(0);
  #arrivals = new Float64Array(0);
  #first = 0;
  #count = 0;

  /** most  readings held at a time */
  constructor(most = MOST_HELD) {
    this.#most = most;
  }

  get count(): number {
    return this.#count;
  }

  /** Holds one; false where the oldest had to make way for it. */
  hold(channel: number, value: number): boolean {
    if (this.#channels === null) {
      this.#channels = new Uint32Array(this.#most);
      this.#values = new Float64Array(this.#most);
      this.#arrivals = new Float64Array(this.#most);
    }
    const at = (this.#first + this.#count) % this.#most;
    this.#channels[at] = channel;
    this.#values[at] = value;
    this.#arrivals[at] = this.nowMs;
    if (this.#count < this.#most) {
      this.#count++;
      return true;
    }
    this.#first = (this.#first + 1) % this.#most;
    return false;
  }

  /** Gives all back, oldest first, and lets go of them. */
  release(take: (channel: number, value: number, arrivalMs: number) => void): void {
    const channels = this.#channels;
    for (let i = 0; i < this.#count && channels !== null; i++) {
      const at = (this.#first + i) % this.#most;
      take(channels[at]!, this.#values[at]!, this.#arrivals[at]!);
    }
    this.#channels = null;
    this.#first = 0;
    this.#count = 0;
  }
}
