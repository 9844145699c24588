/**
 * The factors of a site: what linear learning needs of all its past, in a size that does not grow with it. Lagged products of
 * the changes from tick to tick carry every bank of means, resonators and lags (their features are sums over changes), level
 * sums carry the level, and the ends of runs carry what sums over infinite time count too much. Everything is bilinear in
 * the readings, so factors add, fade and are rescaled; nothing in them is a reading but the last stretch, kept so that the
 * next tick joins on exactly.
 */
import type { RungOut } from './rung-out.ts';

/** What factors are gathered for. */
export interface FactorsShape {
  readonly site: string;
  readonly tickMs: number;
  /** Signals, then inputs. */
  readonly names: readonly string[];
  readonly units: readonly string[];
  readonly signalCount: number;
  /** Digest of signals, order, units and tick, hex. */
  readonly schema: string;
  /** Ticks after which a reading counts half; null: all count alike. */
  readonly halfLifeTicks: number | null;
  /** Furthest lag, ticks. */
  readonly reach: number;
  /** Furthest step that moments can be asked for. */
  readonly longestHorizon: number;
  /** Longest round that can be taken away, ticks; 0: none. */
  readonly longestRound: number;
  /** The shortest gap that ends a run. */
  readonly longGapTicks: number;
}

/**
 * Sums over the runs, each tick weighted by its age. D is a channel's change from the tick before, u its distance from its
 * offset; s goes over a run's ticks but the first, where every channel stood still before.
 */
export interface RunSums {
  /** (nc × nc × grid) Σ D_i(s) D_j(s - lag), spread over the grid's places; entry (i·nc + j)·grid + place. */
  readonly lagged: Float64Array;
  /** (nc × nc) Σ D_i(s) u_j(s). */
  readonly levelChanges: Float64Array;
  /** (nc × nc) Σ u_i(s) u_j(s), on both sides of the diagonal. */
  readonly levels: Float64Array;
  /** (nc × nc) Σ u_i(s) over the runs in which j was there. */
  readonly levelSums: Float64Array;
  /** (nc × nc) Σ D_i(s) over the runs in which j was there. */
  readonly changeSums: Float64Array;
  /** (nc × nc) Σ 1 over the runs in which both were there. */
  readonly counts: Float64Array;
  /** Σ 1 over all runs. */
  readonly count: number;
  /** (nc × nc) u_i(0) u_j(0) at the first ticks of the runs. */
  readonly firstLevels: Float64Array;
  /** (nc × nc) u_i(0) at the first ticks of the runs in which j was there. */
  readonly firstSums: Float64Array;
  /** (nc × nc) 1 at the first ticks of the runs in which both were there. */
  readonly firstCounts: Float64Array;
  /** (nc × nc × H) u_j(0) times D_i of the first H changes, summed up to each; entry (i·nc + j)·H + k - 1. */
  readonly headLevels: Float64Array;
  /** (nc × nc × H) the same with 1 in place of u_j(0). */
  readonly headSums: Float64Array;
  /** (nc × H) Σ (u_i(s) - u_i(0))² over the first H changes, summed up to each. */
  readonly headEnergy: Float64Array;
}

/** How a run ended. */
export interface RunEnd {
  /** Weight of its last tick. */
  readonly weight: number;
  /** (nc) 1 where the channel was there. */
  readonly isThere: Uint8Array;
  /** (nc) u at the last tick. */
  readonly level: Float64Array;
  /** (nc × grid) changes by their age at the last tick, spread over the grid's places. */
  readonly changes: Float64Array;
}

/** Where the next tick joins on: the run that may go on, as it was read. */
export interface OpenRun {
  /** (nc) 1 where the channel is there. */
  readonly isThere: Uint8Array;
  /** Ticks of the run so far, its first included. */
  readonly ticks: number;
  /** (nc) u at the last tick. */
  readonly level: Float64Array;
  /** (nc) of (as far as lags are worked out tick by tick): the last changes, the newest last. */
  readonly changes: readonly Float64Array[];
  /** (nc) of (an eighth of the reach): the changes thinned to every eighth tick, where lags reach further. */
  readonly thinned: readonly Float64Array[];
}

/** Readings that wait for their next, and what is known of those before. */
export interface Waiting {
  /** (nc) last values before; NaN: none. */
  readonly last: Float64Array;
  /** (nc) ticks of the long gap a channel is in. */
  readonly gap: Float64Array;
  /** (nc) of (ticks), NaN missing. */
  readonly values: readonly Float64Array[];
  /** (ticks). */
  readonly isExcluded: Uint8Array;
  /** (ny) what tells wild readings, as wild.ts has it. */
  readonly watches: readonly Float64Array[];
}

/** Frozen; in raw units of the site's channels. */
export interface Factors extends FactorsShape {
  readonly fromTick: number;
  /** First tick not taken in. */
  readonly toTick: number;
  /** Ticks taken in, unweighted. */
  readonly ticks: number;
  /** (nc) what levels are counted from: a reading of each channel; NaN: never read. */
  readonly offsets: Float64Array;
  readonly sums: RunSums;
  /** The ends that are known, the oldest first. */
  readonly ends: readonly RunEnd[];
  /** Of older ones, which rang out; null: there are none. */
  readonly rungOut: RungOut | null;
  readonly open: OpenRun | null;
  readonly waiting: Waiting;
}
