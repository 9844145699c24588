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

/** Close take-overs up to here may be a restart of our own; from here on two clients fight for one client id. */
export const TAKE_OVERS_TO_A_FIGHT = 3;
const FIRST_TRUCE_MS = 60_000;
const LONGEST_TRUCE_MS = 1_800_000;

/**
 * Least wait after the `count`th close take-over: 0 while it may be chance, then half to all of a minute, doubling up to
 * half an hour. Never for good: the other client may be switched off some day, and nobody then comes to start this one.
 *
 * random  a number in [0, 1), passed in so that tests may fix it
 */
export function truceMs(count: number, random: number): number {
  if (count < TAKE_OVERS_TO_A_FIGHT) return 0;
  const bound = Math.min(LONGEST_TRUCE_MS, FIRST_TRUCE_MS * 2 ** Math.min(count - TAKE_OVERS_TO_A_FIGHT, 20));
  return Math.round((bound * (1 + random)) / 2);
}
