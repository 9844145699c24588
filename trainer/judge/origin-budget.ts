/**
 * How many origins are looked at where a part of a history has very many. Paths from neighbouring origins share all but a few
 * of their steps, so that beyond some thousands more of them only repeat what is known: of a mean of losses that go
 * together over a horizon H, every k-th origin with k far below H keeps nearly all the evidence. The filter itself still
 * takes every tick, and the bounds are tracked at every tick; only scores are thinned.
 */

/** Origins scored at most. A horizon of 60 ticks still has 28 of them where a part of 12,800 ticks is thinned to this. */
const MOST_SCORED = 6000;

/**
 * Every how many-th origin is scored: 1 up to 6,000 of them.
 *
 * shapes  none
 * units   origins
 * throws  nothing
 * source  own choice; measured beside all origins in test/trainer/judge/origin-budget.test.ts
 * cost    trivial
 */
export function scoreEvery(origins: number): number {
  return Math.max(1, Math.ceil(origins / MOST_SCORED));
}
