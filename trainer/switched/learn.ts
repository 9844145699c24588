/**
 * From a completed history to the switched section of a model: modes, what they drive, the disturbance and its outlook,
 * when the equipment switches and where that leaves the plant.
 */
import type { SwitchedSection } from '@stillwell/runtime/filter';
import { NO_CORRECTION } from './correction.ts';
import { type Disturbance, findDisturbance } from './disturbance.ts';
import { type DrivenHistory, fitDrift } from './drift.ts';
import { findDriven } from './driven.ts';
import { driftBySwitches } from './jumps.ts';
import { findModes } from './modes.ts';
import { fitOutlook, type Outlook } from './outlook.ts';
import { learnSwitching, usualStay } from './pairs.ts';
import { fitSlopes } from './slopes.ts';
import { findStops, type Stops } from './stops.ts';

/** What is learned from. */
export interface SwitchedInput {
  /** (nc) of (T), standardised, complete; and whether each was read. */
  readonly values: readonly Float64Array[];
  readonly isRead: readonly Uint8Array[];
  readonly signalCount: number;
  readonly horizon: number;
  readonly periodTicks: number;
  readonly firstTick: number;
  readonly learnTicks: number;
}

/** Share of the distance of a near-discrete reading from its mode's value that is remembered. */
const HABIT = 0.1;
/** Stays that a season lasts at least. */
const SEASON_STAYS = 12;
/** Stands for no stop, far beyond any standardised value. */
const NO_STOP = 1e6;

/**
 * Learns the section; null, and quickly, where there are no modes or they drive nothing.
 *
 * shapes  as SwitchedSection
 * units   standardised
 * throws  TrainError 'fit' if a solve fails
 * source  the parts'
 * cost    O(T) with the parts' constants
 */
export function learnSwitched(input: SwitchedInput): SwitchedSection | null {
  const { values, isRead, signalCount, horizon, learnTicks } = input;
  const modes = findModes(values, isRead, signalCount, learnTicks);
  if (modes === null) return null;
  const driven = findDriven(values, isRead, signalCount, modes, learnTicks);
  if (driven.length === 0) return null;
  const history: DrivenHistory = {
    values: driven.map((i) => values[i]),
    isRead: driven.map((i) => isRead[i]),
    stops: driven.map((i) => findStops(values[i].subarray(0, learnTicks), isRead[i])),
    mode: modes.of,
    modeCount: modes.count,
    ticks: learnTicks,
  };
  const drift = driftBySwitches(history, fitDrift(history));
  // A period hardly longer than a cycle of the equipment is that cycle, not a season of what disturbs it.
  const hasSeason = input.periodTicks >= SEASON_STAYS * usualStay(modes.of, learnTicks);
  const disturbance = findDisturbance(history, drift, hasSeason ? input.periodTicks : 0, input.firstTick);
  const inputs = values.slice(signalCount);
  const outlook = fitOutlook(disturbance, inputs, horizon, learnTicks);
  const next = nextSteps(input, disturbance, outlook);
  const switches = learnSwitching(history, drift, next);
  if (switches.pairFrom.length === 0) return null;
  const slopes = fitSlopes(values, isRead, modes, driven, learnTicks);
  const forecast = Int32Array.from([...driven, ...modes.discrete].sort((a, b) => a - b));
  return {
    modeCount: modes.count,
    forecast,
    share: new Float64Array(forecast.length * horizon).fill(1),
    correction: { ...NO_CORRECTION, limit: new Float64Array(forecast.length) },
    discrete: Int32Array.from(modes.discrete),
    driven: Int32Array.from(driven),
    inputs: Int32Array.from(inputs, (_, v) => signalCount + v),
    centre: slopes.centre,
    spread: slopes.spread,
    slope: slopes.slope,
    habit: HABIT,
    ...drift,
    ...switches,
    decays: outlook.decays,
    disturbanceLimit: disturbance.limit,
    stops: stopsOf(history.stops),
    featureScale: outlook.featureScale,
    floodFrom: outlook.floodFrom,
    outlook: outlook.outlook,
    outlookBasis: outlook.outlookBasis,
    seasonTicks: disturbance.periodTicks,
    seasonBins: disturbance.bins,
    season: disturbance.season,
    doubt: outlook.doubt,
    doubtScale: outlook.doubtScale,
  };
}

/** (3 × n) as SwitchedSection has them. */
function stopsOf(stops: readonly Stops[]): Float64Array {
  const most = (value: number): number => Math.max(-NO_STOP, Math.min(NO_STOP, value));
  return Float64Array.from([
    ...stops.map(({ floor }) => most(floor)),
    ...stops.map(({ ceiling }) => most(ceiling)),
    ...stops.map(({ band }) => band),
  ]);
}

/** (n) of (T): the disturbance expected at tick t by what was known at t − 1, season included. */
function nextSteps(input: SwitchedInput, disturbance: Disturbance, outlook: Outlook): Float64Array[] {
  const T = input.values[0].length;
  const { features, featureScale, basisCount } = outlook;
  const width = 2 * featureScale.length;
  const { bins, periodTicks, season } = disturbance;
  return disturbance.w.map((_, i) => {
    const row = new Float64Array(width);
    for (let k = 0; k < basisCount; k++) {
      const weight = outlook.outlookBasis[k];
      for (let f = 0; f < width; f++) row[f] += weight * outlook.outlook[(i * basisCount + k) * width + f];
    }
    const out = new Float64Array(T);
    for (let t = 1; t < T; t++) {
      let sum = 0;
      for (let f = 0; f < width; f++) sum += row[f] * features[(t - 1) * width + f];
      if (periodTicks > 0) {
        const bin = Math.floor((((input.firstTick + t) % periodTicks) * bins) / periodTicks);
        sum += season[i * bins + bin];
      }
      out[t] = sum;
    }
    return out;
  });
}
