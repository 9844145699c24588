/**
 * Waits between attempts to connect: full jitter, so that a thousand clients of one broker do not return in the same
 * instant, over a bound that doubles up to a cap.
 */

/** Bounds of the wait, in ms. */
export interface BackOffOptions {
  /** Largest first wait. Default 5000: clients of a restarted broker spread over five seconds. */
  readonly firstMs: number;
  /** Largest wait of all. Default 60000. */
  readonly capMs: number;
}

/**
 * Wait before attempt `failures` (0 for the first one after a loss): uniform over [50 ms, min(cap, first × 2^failures)].
 *
 * random  a number in [0, 1), passed in so that tests may fix it
 */
export function backOffMs(failures: number, options: BackOffOptions, random: number): number {
  const bound = Math.min(options.capMs, options.firstMs * 2 ** Math.min(failures, 20));
  const least = Math.min(50, bound);
  return Math.round(least + random * (bound - least));
}
