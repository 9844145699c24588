/**
 * Sensors that hang: a reading repeated to the bit for longer than the signal ever does by nature is no longer taken for a
 * reading, and counts as missing until it changes, where the model does better so. How long that is, each signal's history says; values that a signal
 * rests at (a pump that is off, rain that does not fall) may stand for ever. A reading that is missing in between neither
 * ends a run nor makes it longer.
 *
 * Whether the sensor hangs or, for once, the plant stands still, no filter can know. So what is forecast of such a signal
 * leans on its standing reading while that may last: a run of n alike is taken to go on for h more with probability
 * (n / (n + h))², so half of all runs last 1.4 times as long as they have. One power of it leaned too long on sensors that
 * hang, three too short on plants that stand still, where both were measured.
 */
import type { CommonModel } from './model.ts';
import { requireEach, requireField, requireLength } from './requirement.ts';
import type { FilterState } from './state.ts';

/** As it stands in a model. */
export interface StuckGuard {
  /** (ny) a signal stands still from the reading on that ends a run of so many alike; 0: never. */
  readonly ticks: Int32Array;
  /** (ny) of values, in units of the signal, that a signal may repeat for ever. */
  readonly rests: readonly Float64Array[];
  /** Whether such readings count as missing; if not, it is only told that a signal stands still. */
  readonly acts: boolean;
}

/** Longest run that can be asked for: what a snapshot's counter holds. */
const MOST_TICKS = 65_535;

/**
 * Refuses a guard that cannot be computed with.
 *
 * throws  FilterError 'model'
 */
export function checkStuckGuard(model: CommonModel, { ticks, rests }: StuckGuard): void {
  requireLength(ticks, 'stuck.ticks', model.signalCount);
  requireLength(rests, 'stuck.rests', model.signalCount);
  for (let i = 0; i < ticks.length; i++) {
    const isGood = ticks[i] === 0 || (ticks[i] >= 2 && ticks[i] <= MOST_TICKS);
    requireField(isGood, `stuck.ticks[${i}]`, `0, or 2 to ${MOST_TICKS}`, ticks[i]);
    requireEach(rests[i], `stuck.rests[${i}]`, (value) => value - value === 0, 'a finite number');
  }
}

/**
 * Counts a reading.
 *
 * shapes  state.repeats, state.repeated (ny)
 * units   reading in units of the signal, as it came
 * cost    O(1); allocates nothing
 */
export function countRepeats(state: FilterState, signal: number, reading: number): void {
  if (state.repeats[signal] > 0 && reading === state.repeated[signal]) {
    if (state.repeats[signal] < MOST_TICKS) state.repeats[signal]++;
    return;
  }
  state.repeats[signal] = 1;
  state.repeated[signal] = reading;
}

/**
 * Whether the run of equal readings that a signal is in is longer than it ever is by nature.
 *
 * shapes  signal below ny; inputs never stand still
 * cost    O(resting values); allocates nothing
 */
export function standsStill({ stuck, signalCount }: CommonModel, state: FilterState, signal: number): boolean {
  if (stuck === undefined || signal >= signalCount) return false;
  const most = stuck.ticks[signal];
  if (most === 0 || state.repeats[signal] < most) return false;
  const own = stuck.rests[signal];
  for (let k = 0; k < own.length; k++) if (own[k] === state.repeated[signal]) return false;
  return true;
}

/**
 * Leans the path of every signal that stands still on its standing reading, in place.
 *
 * shapes  paths (ny × steps)
 * units   standardised
 * source  tail of a Pareto distribution of index two: Arnold, Pareto Distributions, 2nd ed. (2015), section 1.2
 * cost    O(ny), and O(steps) a signal that stands still; allocates nothing
 */
export function leanOnStanding(model: CommonModel, state: FilterState, steps: number, paths: Float64Array): void {
  for (let i = 0; i < model.signalCount; i++) {
    if (!standsStill(model, state, i)) continue;
    const standing = (state.repeated[i] - model.mean[i]) / model.scale[i];
    const held = Math.min(state.high[i], Math.max(state.low[i], standing));
    const n = state.repeats[i];
    for (let h = 1; h <= steps; h++) {
      const at = i * steps + h - 1;
      const share = n / (n + h);
      paths[at] = paths[at] + share * share * (held - paths[at]);
    }
  }
}
