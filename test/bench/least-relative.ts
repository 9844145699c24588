/** Prices of work that explain what came with the least relative error, none of them negative. */
import type { Work } from '@stillwell/trainer';

const ROUNDS = 200_000;

/**
 * Least squares of Σ price × count / came − 1 under prices ≥ 0, by coordinate descent, which ends at the one least value since
 * the problem is convex.
 */
export function leastRelative(works: readonly Work[], came: readonly number[]): { prices: Work; worst: number } {
  const names = Object.keys(works[0]!);
  const columns = names.map((name) => works.map((work, i) => work[name]! / came[i]!));
  const sizes = columns.map((column) => column.reduce((sum, value) => sum + value * value, 0));
  const prices = names.map(() => 0);
  const left = came.map(() => 1);
  for (let round = 0; round < ROUNDS; round++) {
    for (const [j, column] of columns.entries()) {
      if (sizes[j] === 0) continue;
      const along = column.reduce((sum, value, i) => sum + value * left[i]!, 0);
      const next = Math.max(0, prices[j]! + along / sizes[j]!);
      const change = next - prices[j]!;
      if (change === 0) continue;
      prices[j] = next;
      column.forEach((value, i) => {
        left[i]! -= change * value;
      });
    }
  }
  const worst = Math.max(...left.map((rest) => Math.max(1 - rest, 1 / (1 - rest))));
  return { prices: Object.fromEntries(names.map((name, j) => [name, prices[j]!])), worst };
}
