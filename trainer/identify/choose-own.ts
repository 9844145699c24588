/**
 * Penalties of the own stage, a group of steps at a time. One penalty for all signals, the one with the least mean
 * error over folds, geometric where no fold shall speak louder than another; a signal departs from it only for a clear gain of its
 * own, since a choice for each alone follows the noise of the folds. A signal that does not surely gain on its last value
 * keeps that.
 */
import { type FoldErrors, gainsSurely, leastIndex, powerMean, sumOver } from './fold-errors.ts';
import type { Evidence } from './folds.ts';
import type { Moments } from './moments.ts';
import { type Cell, type Layout, ownFeatures, ridgeOwn } from './ridge.ts';

/** What the own stage is chosen on. `layout.steps` are the trial steps. */
export interface OwnTrial extends Evidence {
  readonly layout: Layout;
  /** Group of each trial step. */
  readonly groups: readonly number[];
}

/** Errors of every penalty tried with one set of features. */
export interface OwnErrors {
  readonly kept: readonly number[];
  /** Ascending. */
  readonly penalties: readonly number[];
  readonly errors: readonly FoldErrors[];
  /** (groups) index of the penalty that serves all signals. */
  readonly common: readonly number[];
}

/** What was settled on. */
export interface OwnChoice {
  /** (ny × groups) */
  readonly cells: (Cell | null)[][];
  /** Errors of these cells. */
  readonly errors: FoldErrors;
}

const PENALTIES = [0.001, 0.003, 0.01, 0.03, 0.1, 0.3, 1, 3] as const;
/** Where the heaviest of those is the best for some group, heavier ones are tried up to this; beyond lies the last value. */
const HEAVIEST = 100;
/** Where the lightest is, lighter ones down to this: plants with next to no noise. */
const LIGHTEST = 1e-5;
const HALF_DECADE = Math.sqrt(10);
/** A signal departs from the common penalty only for this gain, and leaves its last value only for that one. */
const DEPART_GAIN = 0.02;
const DEPART_CHANCE = 0.05;
const STILL_GAIN = 0.002;

/**
 * Tries penalties with one set of features.
 *
 * shapes  kept ascending within a channel; `among` the only penalties to try, or null for all
 * units   penalties relative to each feature's own second moment
 * throws  TrainError 'fit' from the solves
 * source  none
 * cost    folds × penalties × ny solves of (1 + nu)·kept equations
 */
export function tryOwn(trial: OwnTrial, kept: readonly number[], among: readonly number[] | null): OwnErrors {
  const { folds, layout } = trial;
  const isKept = new Set(kept);
  const signals = Array.from({ length: layout.signalCount }, (_, i) => i);
  const chosenOf = signals.map((i) => ownFeatures(layout, i).filter((f) => isKept.has(f % layout.featureCount)));
  const attempt = (penalty: number): FoldErrors => {
    // Folds that learn from the same have the same maps.
    const maps = new Map<Moments, readonly Float64Array[]>();
    return folds.map(({ learn, judge }) => {
      const known = maps.get(learn) ?? signals.map((i) => ridgeOwn(learn, layout, i, chosenOf[i], penalty));
      maps.set(learn, known);
      const out = new Float64Array(layout.signalCount * layout.steps);
      for (const i of signals) out.set(ownError(judge, layout, i, chosenOf[i], known[i]), i * layout.steps);
      return out;
    });
  };
  const penalties = [...(among ?? PENALTIES)];
  const errors = penalties.map(attempt);
  let common = commonOf(trial, errors);
  if (among !== null) return { kept, penalties, errors, common };
  while (Math.max(...common) === penalties.length - 1 && penalties[penalties.length - 1] < HEAVIEST / 1.01) {
    penalties.push(penalties[penalties.length - 1] * HALF_DECADE);
    errors.push(attempt(penalties[penalties.length - 1]));
    common = commonOf(trial, errors);
  }
  while (Math.min(...common) === 0 && penalties[0] > LIGHTEST * 1.01) {
    penalties.unshift(penalties[0] / 10);
    errors.unshift(attempt(penalties[0]));
    common = commonOf(trial, errors);
  }
  return { kept, penalties, errors, common };
}

/** (groups) */
function commonOf({ layout, groups, weights, tie }: OwnTrial, errors: readonly FoldErrors[]): number[] {
  const count = groups[groups.length - 1] + 1;
  return Array.from({ length: count }, (_, g) => {
    const means = errors.map((one) =>
      powerMean(
        sumOver(one, layout.steps, (_i, s) => groups[s] === g),
        weights,
      ),
    );
    const least = Math.min(...means);
    return means.findLastIndex((mean) => mean <= least * (1 + tie));
  });
}

/**
 * Settles each signal's penalty in each group.
 *
 * shapes  variant(group) the errors of the features used in that group, all of the same trial
 * units   as `tryOwn`
 * throws  nothing
 * source  none
 * cost    trivial
 */
export function settleOwn(trial: OwnTrial, variant: (group: number) => OwnErrors): OwnChoice {
  const { folds, layout, groups } = trial;
  // A penalty adds nothing that could go wrong: it need not be as sure as lags and levels.
  const weights = { ...trial.weights, doubt: 1 };
  const count = groups[groups.length - 1] + 1;
  const still = lastValueErrors(folds, layout);
  const errors = still.map((fold) => fold.slice());
  const cells = Array.from({ length: layout.signalCount }, (_, i) => {
    const picked = Array.from({ length: count }, (_, g) => {
      const { penalties, common, kept, errors: tried } = variant(g);
      const inGroup = (one: FoldErrors): number[] =>
        sumOver(one, layout.steps, (signal, s) => signal === i && groups[s] === g);
      const own = tried.map(inGroup);
      const best = leastIndex(own.map((one) => powerMean(one, weights)));
      const at = gainsSurely(own[best], own[common[g]], DEPART_GAIN, weights, DEPART_CHANCE) ? best : common[g];
      const isBetter = powerMean(own[at], weights) < powerMean(inGroup(still), weights);
      return { cell: isBetter ? { penalty: penalties[at], kept } : null, errors: isBetter ? tried[at] : still };
    });
    const joined = folds.map((_, f) => picked.map((one) => one.errors[f]));
    const ofSignal = joined.map((byGroup) => signalScore(byGroup, i, layout.steps, groups));
    const without = still.map((fold) => signalScore(new Array(count).fill(fold), i, layout.steps, groups));
    if (!gainsSurely(ofSignal, without, STILL_GAIN, weights)) return picked.map(() => null);
    joined.forEach((byGroup, f) => {
      for (let s = 0; s < layout.steps; s++) errors[f][i * layout.steps + s] = byGroup[groups[s]][i * layout.steps + s];
    });
    return picked.map(({ cell }) => cell);
  });
  return { cells, errors };
}

/** Sum of a signal's errors over the steps, each step from its own group's errors. */
function signalScore(
  byGroup: readonly Float64Array[],
  signal: number,
  steps: number,
  groups: readonly number[],
): number {
  let sum = 0;
  for (let s = 0; s < steps; s++) sum += byGroup[groups[s]][signal * steps + s];
  return sum;
}

/**
 * Errors of the last value.
 *
 * shapes  as FoldErrors
 * units   standardised²
 * throws  nothing
 * source  none
 * cost    trivial
 */
export function lastValueErrors(folds: readonly { readonly judge: Moments }[], layout: Layout): Float64Array[] {
  return folds.map(({ judge }) =>
    judge.energy.slice(0, layout.signalCount * layout.steps).map((sum) => sum / judge.origins),
  );
}

/** (steps) mean squared errors of one signal's own map on what judges it. */
function ownError(judge: Moments, layout: Layout, signal: number, chosen: Int32Array, map: Float64Array): Float64Array {
  const p = layout.channelCount * layout.featureCount;
  const width = layout.signalCount * layout.steps;
  const { steps } = layout;
  const { features, future, energy, origins } = judge;
  const out = energy.slice(signal * steps, (signal + 1) * steps);
  const pushed = new Float64Array(steps);
  for (let a = 0; a < chosen.length; a++) {
    pushed.fill(0);
    const from = chosen[a] * p;
    for (let b = 0; b < chosen.length; b++) {
      const s = features[from + chosen[b]];
      for (let h = 0; h < steps; h++) pushed[h] += s * map[b * steps + h];
    }
    const row = chosen[a] * width + signal * steps;
    for (let h = 0; h < steps; h++) out[h] += map[a * steps + h] * (pushed[h] - 2 * future[row + h]);
  }
  for (let h = 0; h < steps; h++) out[h] = Math.max(0, out[h]) / origins;
  return out;
}
