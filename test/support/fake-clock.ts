/** Clocks that a test turns by hand. */
import type { Clock } from '../../runtime/clock.ts';

/** Monotonic and wall time that pass together unless the wall clock is stepped; timers never fire. */
export class FakeClock implements Clock {
  #monotonicMs = 1000;
  #offsetMs: number;

  constructor(wallMs: number) {
    this.#offsetMs = wallMs - this.#monotonicMs;
  }

  wall(): number {
    return this.#monotonicMs + this.#offsetMs;
  }

  monotonic(): number {
    return this.#monotonicMs;
  }

  after(): () => void {
    return () => {};
  }

  pass(ms: number): void {
    this.#monotonicMs += ms;
  }

  step(ms: number): void {
    this.#offsetMs += ms;
  }
}
