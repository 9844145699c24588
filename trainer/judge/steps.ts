/** The few steps of a horizon that stand for all where a table has no room for more. */

/** Steps the verdicts stand for: 1, H/4, H/2 and H, without repeats. */
export function verdictSteps(horizon: number): number[] {
  const steps = [1, Math.round(horizon / 4), Math.round(horizon / 2), horizon].map((h) => Math.max(1, h));
  return [...new Set(steps)].sort((a, b) => a - b);
}
