/**
 * Rolling origins over replayed origins: groups in time order, a horizon apart, each judged by what was learned from all
 * before it.
 */

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

/** A diagonal entry below this share of the largest counts as this share, so that a silent one is held at zero. */
const SILENT_SHARE = 1e-12;

/**
 * Moments with a ridge: a copy, each diagonal entry raised by a share of itself.
 *
 * shapes  gram (n × n); result likewise
 * units   any
 * throws  nothing
 * source  Hoerl & Kennard, Technometrics 12 (1970), with k times each second moment
 * cost    O(n²)
 */
export function penalised(gram: Float64Array, n: number, penalty: number): Float64Array {
  const out = gram.slice();
  let largest = 0;
  for (let a = 0; a < n; a++) largest = Math.max(largest, gram[a * n + a]);
  const floor = largest > 0 ? largest * SILENT_SHARE : 1;
  for (let a = 0; a < n; a++) out[a * n + a] += Math.max(penalty * gram[a * n + a], floor);
  return out;
}
