/** Time as a port, so that tests own it. Wall time labels; monotonic time measures and waits. */

/** The clocks of a machine. */
export interface Clock {
  /** Wall clock, ms since 1970 UTC. May step. */
  wall(): number;
  /** Never steps back, ms from an arbitrary start. */
  monotonic(): number;
  /** Calls `work` after `ms` of monotonic time unless cancelled by the function returned. */
  after(ms: number, work: () => void): () => void;
}

/** Node timers above this fire at once. */
const LONGEST_TIMER_MS = 2 ** 31 - 1;

/** The machine's own clocks. */
export const systemClock: Clock = {
  wall: () => Date.now(),
  monotonic: () => performance.now(),
  after(ms, work) {
    const timer = setTimeout(work, Math.min(Math.max(0, ms), LONGEST_TIMER_MS));
    return () => clearTimeout(timer);
  },
};
