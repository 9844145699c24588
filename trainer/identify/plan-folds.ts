/**
 * Rolling origins over replayed origins: groups in time order, a horizon apart, each judged by what was learned from all
 * before it.
 */

import { multiply } from '../linalg/products.ts';

/** A cut of the origins. */
export interface PlanFolds {
  readonly groups: number;
  /** (n) group of each origin; -1: its future reaches into the next group, so it belongs to none. */
  readonly groupOf: Int8Array;
  /** Calls for every fold, in order, with the groups to learn from and the one to judge, and gives the results. */
  each<T>(judge: (learned: readonly number[], judged: number) => T): T[];
}

const MOST_GROUPS = 8;
/** A group shorter than this many horizons says little. */
const GROUP_HORIZONS = 3;
const FIRST_FOLD = 3;

/**
 * Cuts.
 *
 * shapes  at (n) ascending indices of the origins
 * units   ticks
 * throws  nothing
 * source  rolling origin: Tashman, International Journal of Forecasting 16 (2000)
 * cost    O(n)
 */
export function cutFolds(at: Int32Array, horizon: number): PlanFolds {
  const first = at[0] ?? 0;
  const ticks = (at[at.length - 1] ?? 0) + 1 - first;
  const groups = Math.max(2, Math.min(MOST_GROUPS, Math.floor(ticks / (GROUP_HORIZONS * horizon))));
  const groupOf = Int8Array.from(at, (t) => {
    const group = Math.min(groups - 1, Math.floor(((t - first) * groups) / ticks));
    const end = first + Math.floor(((group + 1) * ticks) / groups);
    return group < groups - 1 && t + horizon >= end ? -1 : group;
  });
  const opening = Math.max(1, Math.min(FIRST_FOLD, groups - 2));
  return {
    groups,
    groupOf,
    each: (judge) =>
      Array.from({ length: groups - opening }, (_, k) =>
        judge(
          Array.from({ length: opening + k }, (__, g) => g),
          opening + k,
        ),
      ),
  };
}

/** Sums behind a ridge solve of one group of origins. */
export interface PlanSums {
  /** (n × n) regressors by regressors. */
  readonly gram: Float64Array;
  /** (n × targets) */
  readonly right: Float64Array;
  /** Squared targets. */
  energy: number;
}

/**
 * The sums of several groups together, but for the energy, which only judges.
 *
 * shapes  all alike, at least one
 * units   as PlanSums
 * throws  nothing
 * source  definition
 * cost    O(n²) a group
 */
export function joinSums(parts: readonly PlanSums[]): PlanSums {
  const out: PlanSums = { gram: parts[0].gram.slice(), right: parts[0].right.slice(), energy: 0 };
  for (const part of parts.slice(1)) {
    for (let k = 0; k < out.gram.length; k++) out.gram[k] += part.gram[k];
    for (let k = 0; k < out.right.length; k++) out.right[k] += part.right[k];
  }
  return out;
}

/**
 * Squared error that a map leaves of a group, by its sums alone.
 *
 * shapes  map (n × targets)
 * units   squared targets, summed
 * throws  nothing
 * source  definition
 * cost    O(n² targets)
 */
export function errorOf({ gram, right, energy }: PlanSums, map: Float64Array): number {
  const n = Math.round(Math.sqrt(gram.length));
  const pushed = multiply(gram, map, n, n, map.length / n);
  let error = energy;
  for (let k = 0; k < map.length; k++) error += map[k] * (pushed[k] - 2 * right[k]);
  return Math.max(0, error);
}
