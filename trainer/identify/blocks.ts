/**
 * How the learning and calibration parts are cut for rolling origins: consecutive groups of origins, each a horizon short
 * of the next, so that no future used for learning lies in the group that judges it. Origins that would look into a long
 * gap or into excluded time are left out.
 */
import { EXCLUDED, LONG_GAP } from './fill.ts';
import type { Block } from './moments.ts';

/** The cut. All blocks together are disjoint. */
export interface Partition {
  /** Groups in time order; each a list of blocks. The first `learnGroups` lie in the learning part. */
  readonly groups: readonly (readonly Block[])[];
  readonly learnGroups: number;
  /** Origins between two learning groups: for the final fit, not for folds. */
  readonly between: readonly Block[];
  /** True if long gaps covered so much that they had to be used, filled. */
  readonly usesLongGaps: boolean;
}

const MOST_GROUPS = 8;
/** A group shorter than this many horizons says little; with longer ones a short record would have too few. */
const GROUP_HORIZONS = 2;

/**
 * Cuts learning and calibration parts.
 *
 * shapes  inLongGap (ticks) as Filled has it; settle the first origin's index
 * units   ticks
 * throws  RangeError if the learning part holds no origin
 * source  rolling origin: Tashman, International Journal of Forecasting 16 (2000)
 * cost    O(T)
 */
export function partition(
  learnTicks: number,
  calibrateTicks: number,
  settle: number,
  horizon: number,
  inLongGap: Uint8Array,
): Partition {
  const outsideGaps = usableOrigins(inLongGap, horizon, learnTicks + calibrateTicks, LONG_GAP);
  const allowed = usableOrigins(inLongGap, horizon, learnTicks + calibrateTicks, EXCLUDED);
  const usesLongGaps = count(outsideGaps) < 0.5 * count(allowed);
  const usable = usesLongGaps ? allowed : outsideGaps;
  const total = learnTicks - settle + calibrateTicks;
  const groups = Math.max(2, Math.min(MOST_GROUPS, Math.floor(total / (GROUP_HORIZONS * horizon + 8))));
  const learnGroups = Math.max(1, Math.min(groups - 1, Math.round((groups * (learnTicks - settle)) / total)));
  const edges: number[] = [];
  for (let g = 0; g <= learnGroups; g++) {
    edges.push(settle + Math.round((g * (learnTicks - settle)) / learnGroups));
  }
  const calibrateGroups = groups - learnGroups;
  for (let g = 1; g <= calibrateGroups; g++)
    edges.push(learnTicks + Math.round((g * calibrateTicks) / calibrateGroups));
  const cut: Block[][] = [];
  const between: Block[] = [];
  for (let g = 0; g < groups; g++) {
    cut.push(runs(usable, edges[g], edges[g + 1] - horizon));
    if (g + 1 < learnGroups) between.push(...runs(usable, edges[g + 1] - horizon, edges[g + 1]));
  }
  if (cut.slice(0, learnGroups).flat().length === 0) throw new RangeError('The learning part holds no usable origin.');
  return { groups: cut, learnGroups, between, usesLongGaps };
}

/**
 * Blocks of all usable origins of a span, for a fit without folds.
 *
 * shapes  inLongGap (ticks) as Filled has it
 * units   indices; the last origin has the whole horizon before `end`
 * throws  nothing
 * source  none
 * cost    O(T)
 */
export function usableBlocks(from: number, end: number, horizon: number, inLongGap: Uint8Array): Block[] {
  const outsideGaps = runs(usableOrigins(inLongGap, horizon, end, LONG_GAP), from, end - horizon);
  if (outsideGaps.length > 0) return outsideGaps;
  return runs(usableOrigins(inLongGap, horizon, end, EXCLUDED), from, end - horizon);
}

/** (ticks) 1 where neither the origin nor its future lies in time marked `least` or above. */
function usableOrigins(inLongGap: Uint8Array, horizon: number, ticks: number, least: number): Uint8Array {
  const usable = new Uint8Array(ticks);
  let nextGap = Number.POSITIVE_INFINITY;
  for (let t = Math.min(inLongGap.length, ticks) - 1; t >= 0; t--) {
    if (inLongGap[t] >= least) nextGap = t;
    usable[t] = nextGap > t + horizon ? 1 : 0;
  }
  return usable;
}

function count(flags: Uint8Array): number {
  return flags.reduce((sum, flag) => sum + flag, 0);
}

function runs(usable: Uint8Array, from: number, to: number): Block[] {
  const out: Block[] = [];
  for (let t = Math.max(1, from); t < to; t++) {
    if (usable[t] === 0) continue;
    const fromIndex = t;
    while (t < to && usable[t] === 1) t++;
    out.push({ fromIndex, toIndex: t });
  }
  return out;
}
