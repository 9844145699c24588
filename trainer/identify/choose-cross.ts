/**
 * Penalties of the cross stage: one for all signals in each group of steps; a signal, or a group of its steps, is left out
 * where it does not gain. Lags and levels of the other channels are let in only for a sure gain.
 */

import { lastValueErrors, type OwnChoice, type OwnTrial } from './choose-own.ts';
import { type FoldErrors, gainsSurely, leastIndex, powerMean, sumOver } from './fold-errors.ts';
import { weightsOf } from './folds.ts';
import type { Moments } from './moments.ts';
import {
  type Cell,
  type CrossSystem,
  crossSystem,
  type Layout,
  leftByOwn,
  mapError,
  ownMap,
  solveCross,
} from './ridge.ts';

/** The first two tried, then what lies between them or beyond the better one. */
const PENALTIES = [1, 10] as const;
const HALF_DECADE = Math.sqrt(10);
/** Down to this, a decade at a time: signals that are one thing seen twice. */
const LIGHTEST = 1e-4;
const HEAVIEST = 100;
/** A signal joins for this gain, other features for that one. */
const JOIN_GAIN = 0.001;
const MORE_GAIN = 0.002;
const STILL_GAIN = 0.002;
/** With more equations than this, features beside the plain ones are not tried, and the later folds alone judge. */
const MOST_TRIED = 512;
const FEW_FOLDS = 3;
/** With more products than this in one try, channels are too many for a cross stage. */
const MOST_PRODUCTS = 4e8;

/** A fold ready for trying penalties. */
interface Ready {
  readonly judge: Moments;
  readonly lesson: Lesson;
}

/** What a fold learned: its own stage's map, what that left, and the equations of the cross stage. */
interface Lesson {
  readonly own: Float64Array;
  readonly left: Float64Array;
  readonly system: CrossSystem;
}

/** Errors of the penalties tried with one set of features. */
interface Tried {
  readonly kept: readonly number[];
  readonly penalties: readonly number[];
  readonly errors: readonly FoldErrors[];
}

/**
 * Chooses the cells of the cross stage.
 *
 * shapes  own as chosen on the trial; variants: features within a channel, the plain ones first; result (ny × groups)
 * units   penalties relative to each feature's own second moment
 * throws  TrainError 'fit' from the solves
 * source  none
 * cost    folds × penalties solves of nc·kept equations
 */
export function chooseCross(
  whole: OwnTrial,
  wholeOwn: OwnChoice,
  variants: readonly (readonly number[])[],
): (Cell | null)[][] {
  const { layout, groups } = whole;
  const count = groups[groups.length - 1] + 1;
  const equations = layout.channelCount * variants[0].length;
  const none = wholeOwn.cells.map((cells) => cells.map(() => null));
  if (layout.channelCount === 1 || !isWithinReach(layout, equations)) return none;
  const { trial, own } = equations > MOST_TRIED ? lastFolds(whole, wholeOwn) : { trial: whole, own: wholeOwn };
  const unit = Array.from({ length: count }, (_, g) => ({
    from: groups.indexOf(g) + 1,
    to: groups.lastIndexOf(g) + 1,
  }));
  // Folds that learn from the same share all but what judges them.
  const lessons = [...new Set(trial.folds.map(({ learn }) => learn))].map((learn) => {
    const map = ownMap(learn, layout, unit, own.cells);
    return { learn, own: map, left: leftByOwn(learn, layout, map) };
  });
  const ready = (kept: readonly number[]): Ready[] => {
    const known = lessons.map((one) => ({ ...one, system: crossSystem(one.learn, layout, kept) }));
    return trial.folds.map(({ learn, judge }) => ({ judge, lesson: known.find((one) => one.learn === learn)! }));
  };
  let best = tryAll(trial, ready(variants[0]), variants[0]);
  for (const kept of variants.slice(1)) {
    if (layout.channelCount * kept.length > MOST_TRIED) continue;
    const common = [...new Set(commonOf(trial, best).map((at) => best.penalties[at]))];
    const more = tryThese(trial, ready(kept), kept, common);
    if (gainsSurely(scores(trial, more), scores(trial, best), MORE_GAIN, trial.weights)) best = more;
  }
  return settle(trial, own, best);
}

/**
 * Whether the channels are few enough for a cross stage.
 *
 * shapes  none
 * units   equations: features of all channels
 * throws  nothing
 * source  none
 * cost    trivial
 */
export function isWithinReach(layout: Layout, equations: number): boolean {
  return equations * equations * layout.signalCount * layout.steps < MOST_PRODUCTS;
}

/** The folds that learn from most. */
function lastFolds(trial: OwnTrial, own: OwnChoice): { readonly trial: OwnTrial; readonly own: OwnChoice } {
  const folds = trial.folds.slice(-FEW_FOLDS);
  return {
    trial: { ...trial, folds, weights: { ...trial.weights, shares: weightsOf(folds, trial.weights.power).shares } },
    own: { ...own, errors: own.errors.slice(-FEW_FOLDS) },
  };
}

function tryAll(trial: OwnTrial, ready: readonly Ready[], kept: readonly number[]): Tried {
  let tried = tryThese(trial, ready, kept, PENALTIES);
  for (;;) {
    const totals = tried.errors.map((one) =>
      powerMean(
        sumOver(one, trial.layout.steps, () => true),
        trial.weights,
      ),
    );
    const least = tried.penalties[leastIndex(totals)];
    const isEnd = least === Math.min(...tried.penalties) && least > LIGHTEST * 1.01;
    const isHeavy = least === Math.max(...tried.penalties) && least < HEAVIEST / 1.01;
    if (isEnd && least <= 1) tried = joined(tried, tryThese(trial, ready, kept, [least / 10]));
    else if (isHeavy && least < 10 * 1.01) tried = joined(tried, tryThese(trial, ready, kept, [least * HALF_DECADE]));
    else break;
  }
  const totals = tried.errors.map((one) =>
    powerMean(
      sumOver(one, trial.layout.steps, () => true),
      trial.weights,
    ),
  );
  const [best, second] = tried.penalties
    .map((penalty, k) => ({ penalty, total: totals[k] }))
    .sort((one, other) => one.total - other.total);
  const between = Math.sqrt(best.penalty * second.penalty);
  return joined(tried, tryThese(trial, ready, kept, [between]));
}

function joined(a: Tried, b: Tried): Tried {
  return { kept: a.kept, penalties: [...a.penalties, ...b.penalties], errors: [...a.errors, ...b.errors] };
}

function tryThese(
  trial: OwnTrial,
  ready: readonly Ready[],
  kept: readonly number[],
  penalties: readonly number[],
): Tried {
  const errors = penalties.map((penalty) => {
    const maps = new Map<Lesson, Float64Array>();
    return ready.map(({ judge, lesson }) => {
      const map = maps.get(lesson) ?? bothStages(trial, lesson, penalty);
      maps.set(lesson, map);
      return mapError(judge, trial.layout, map);
    });
  });
  return { kept, penalties, errors };
}

/** (p × ny · steps) map of both stages. */
function bothStages({ layout }: OwnTrial, { own, left, system }: Lesson, penalty: number): Float64Array {
  const width = layout.signalCount * layout.steps;
  const { chosen } = system;
  const right = new Float64Array(chosen.length * width);
  chosen.forEach((f, a) => {
    right.set(left.subarray(f * width, (f + 1) * width), a * width);
  });
  solveCross(system, penalty, right, width);
  const map = own.slice();
  chosen.forEach((f, a) => {
    for (let k = 0; k < width; k++) map[f * width + k] += right[a * width + k];
  });
  return map;
}

/** (groups) index of the penalty that serves all signals. */
function commonOf({ layout, groups, weights }: OwnTrial, { errors }: Tried): number[] {
  return Array.from({ length: groups[groups.length - 1] + 1 }, (_, g) =>
    leastIndex(
      errors.map((one) =>
        powerMean(
          sumOver(one, layout.steps, (_i, s) => groups[s] === g),
          weights,
        ),
      ),
    ),
  );
}

/** (folds) with each group's penalty, the geometric mean over the signals: none speaks louder for being harder to know. */
function scores(trial: OwnTrial, tried: Tried): number[] {
  const { layout, groups } = trial;
  const common = commonOf(trial, tried);
  const shares = Array.from({ length: layout.signalCount }, () => 1 / layout.signalCount);
  const even = { shares, power: 0 };
  return trial.folds.map((_, f) => {
    const bySignal = shares.map((_share, i) =>
      common.reduce((sum, at, g) => {
        const [one] = sumOver([tried.errors[at][f]], layout.steps, (signal, s) => signal === i && groups[s] === g);
        return sum + one;
      }, 0),
    );
    return powerMean(bySignal, even);
  });
}

function settle(trial: OwnTrial, own: OwnChoice, tried: Tried): (Cell | null)[][] {
  const { layout, groups, folds } = trial;
  // A penalty adds nothing that could go wrong: it need not be as sure as lags and levels.
  const weights = { ...trial.weights, doubt: 1 };
  const common = commonOf(trial, tried);
  const still = lastValueErrors(folds, layout);
  return own.cells.map((cells, i) => {
    const of = (errors: FoldErrors, g: number): number[] =>
      sumOver(errors, layout.steps, (signal, s) => signal === i && groups[s] === g);
    const gains = cells.map(
      (_, g) => powerMean(of(tried.errors[common[g]], g), weights) < powerMean(of(own.errors, g), weights),
    );
    const total = (errorsOf: (g: number) => FoldErrors): number[] =>
      cells.map((_, g) => of(errorsOf(g), g)).reduce((sum, group) => sum.map((value, f) => value + group[f]));
    const both = total((g) => (gains[g] ? tried.errors[common[g]] : own.errors));
    const alone = total(() => own.errors);
    const isBetter = powerMean(both, weights) < powerMean(alone, weights) * (1 - JOIN_GAIN);
    if (
      !isBetter ||
      !gainsSurely(
        both,
        total(() => still),
        STILL_GAIN,
        weights,
      )
    )
      return cells.map(() => null);
    return gains.map((isGain, g) => (isGain ? { penalty: tried.penalties[common[g]], kept: tried.kept } : null));
  });
}
