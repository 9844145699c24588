/** Sums over runs while they grow: levels, heads and what counts them. What each means is said in factors.ts. */
import type { RunSums } from './factors.ts';

/** The sums, still changing. */
export class MutableSums implements RunSums {
  readonly lagged: Float64Array;
  readonly levelChanges: Float64Array;
  readonly levels: Float64Array;
  readonly levelSums: Float64Array;
  readonly changeSums: Float64Array;
  readonly counts: Float64Array;
  count: number;
  readonly firstLevels: Float64Array;
  readonly firstSums: Float64Array;
  readonly firstCounts: Float64Array;
  readonly headLevels: Float64Array;
  readonly headSums: Float64Array;
  readonly headEnergy: Float64Array;

  constructor(from: RunSums) {
    this.lagged = from.lagged.slice();
    this.levelChanges = from.levelChanges.slice();
    this.levels = from.levels.slice();
    this.levelSums = from.levelSums.slice();
    this.changeSums = from.changeSums.slice();
    this.counts = from.counts.slice();
    this.count = from.count;
    this.firstLevels = from.firstLevels.slice();
    this.firstSums = from.firstSums.slice();
    this.firstCounts = from.firstCounts.slice();
    this.headLevels = from.headLevels.slice();
    this.headSums = from.headSums.slice();
    this.headEnergy = from.headEnergy.slice();
  }

  /** A copy that stands. */
  copy(): RunSums {
    return Object.freeze(new MutableSums(this));
  }
}

/** Names of the arrays among the sums, in the order of the file. */
export const SUM_ARRAYS = [
  'lagged',
  'levelChanges',
  'levels',
  'levelSums',
  'changeSums',
  'counts',
  'firstLevels',
  'firstSums',
  'firstCounts',
  'headLevels',
  'headSums',
  'headEnergy',
] as const;

/**
 * Lengths of the arrays.
 *
 * shapes  as factors.ts says
 * units   entries
 * throws  nothing
 * source  none
 * cost    trivial
 */
export function sumLengths(
  channels: number,
  places: number,
  horizon: number,
): Readonly<Record<(typeof SUM_ARRAYS)[number], number>> {
  const pairs = channels * channels;
  return {
    lagged: pairs * places,
    levelChanges: pairs,
    levels: pairs,
    levelSums: pairs,
    changeSums: pairs,
    counts: pairs,
    firstLevels: pairs,
    firstSums: pairs,
    firstCounts: pairs,
    headLevels: pairs * horizon,
    headSums: pairs * horizon,
    headEnergy: channels * horizon,
  };
}

/**
 * Sums of nothing, or a copy to go on from.
 *
 * shapes  as `sumLengths`
 * units   raw
 * throws  nothing
 * source  none
 * cost    one copy
 */
export function emptySums(channels: number, places: number, horizon: number, from: RunSums | null): MutableSums {
  if (from !== null) return new MutableSums(from);
  const lengths = sumLengths(channels, places, horizon);
  const arrays = Object.fromEntries(SUM_ARRAYS.map((key) => [key, new Float64Array(lengths[key])]));
  return new MutableSums({ ...arrays, count: 0 } as unknown as RunSums);
}

/** Makes all of it lighter. */
export function scaleSums(sums: MutableSums, factor: number): void {
  sums.count *= factor;
  for (const key of SUM_ARRAYS) for (let k = 0; k < sums[key].length; k++) sums[key][k] *= factor;
}

/** Some ticks of a run. */
export interface BlockOfRun {
  /** (nc) of (ticks). */
  readonly changes: readonly Float64Array[];
  readonly levels: readonly Float64Array[];
  /** (ticks), the last 1; null: all 1. */
  readonly weights: Float64Array | null;
  /** Index of the first of them within the run. */
  readonly firstTick: number;
  /** (nc) u at the run's first tick. */
  readonly first: Float64Array;
  readonly isThere: Uint8Array;
}

/**
 * Adds a block's products and sums of levels and changes.
 *
 * shapes  as factors.ts says
 * units   raw
 * throws  nothing
 * source  definitions
 * cost    O(nc² ticks)
 */
export function addLevels(
  sums: MutableSums,
  { changes, levels, weights, firstTick, isThere }: BlockOfRun,
  channels: number,
  vectorDot: (a: Float64Array, b: Float64Array) => number,
): void {
  // A run's first tick has a level but no change; it counts as a head only.
  const from = firstTick === 0 ? 1 : 0;
  const part = (row: Float64Array): Float64Array => row.subarray(from);
  const weight = (row: Float64Array): Float64Array =>
    weights === null ? part(row) : part(row.map((value, k) => value * weights[k]));
  const product = weights === null ? vectorDot : dot;
  const total = weights === null ? changes[0].length - from : sumOf(part(weights));
  sums.count += total;
  for (let i = 0; i < channels; i++) {
    if (isThere[i] === 0) continue;
    const change = weight(changes[i]);
    const level = weight(levels[i]);
    const changed = sumOf(change);
    const stood = sumOf(level);
    for (let j = 0; j < channels; j++) {
      if (isThere[j] === 0) continue;
      const pair = i * channels + j;
      const other = part(levels[j]);
      sums.levelChanges[pair] += product(change, other);
      sums.levelSums[pair] += stood;
      sums.changeSums[pair] += changed;
      sums.counts[pair] += total;
      if (j > i) continue;
      const both = product(level, other);
      sums.levels[pair] += both;
      if (j < i) sums.levels[j * channels + i] += both;
    }
  }
}

/**
 * Adds a run's head: its first tick, and its first `horizon` changes.
 *
 * shapes  as factors.ts says; the block starts with the run and is longer than the horizon
 * units   raw
 * throws  nothing
 * source  definitions
 * cost    O(nc² horizon)
 */
export function addHeads(sums: MutableSums, block: BlockOfRun, channels: number, horizon: number): void {
  const { changes, levels, weights, first, isThere } = block;
  const weightAt = (s: number): number => (weights === null ? 1 : weights[s]);
  for (let i = 0; i < channels; i++) {
    if (isThere[i] === 0) continue;
    let moved = 0;
    let energy = 0;
    for (let s = 1; s <= horizon; s++) {
      moved += weightAt(s) * changes[i][s];
      energy += weightAt(s) * (levels[i][s] - first[i]) ** 2;
      sums.headEnergy[i * horizon + s - 1] += energy;
      for (let j = 0; j < channels; j++) {
        if (isThere[j] === 0) continue;
        const at = (i * channels + j) * horizon + s - 1;
        sums.headLevels[at] += moved * first[j];
        sums.headSums[at] += moved;
      }
    }
    for (let j = 0; j < channels; j++) {
      if (isThere[j] === 0) continue;
      const pair = i * channels + j;
      sums.firstLevels[pair] += weightAt(0) * first[i] * first[j];
      sums.firstSums[pair] += weightAt(0) * first[i];
      sums.firstCounts[pair] += weightAt(0);
    }
  }
}

function dot(a: Float64Array, b: Float64Array): number {
  let even = 0;
  let odd = 0;
  let k = 0;
  for (; k + 1 < a.length; k += 2) {
    even += a[k] * b[k];
    odd += a[k + 1] * b[k + 1];
  }
  return k < a.length ? even + odd + a[k] * b[k] : even + odd;
}

function sumOf(a: Float64Array): number {
  let sum = 0;
  for (let k = 0; k < a.length; k++) sum += a[k];
  return sum;
}
