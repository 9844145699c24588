/**
 * Penalties of the cross stage: one for all signals in each group of steps; a signal, or a group of its steps, is left out
 * where it does not gain. Lags and levels of the other channels are let in only for a sure gain.
 */

import { lastValueErrors, type OwnChoice, type OwnTrial } from './choose-own.ts';
import { type FoldErrors, gainsSurely, geometric, leastIndex, sumOver } from './fold-errors.ts';
import { type Cell, type CrossSystem, crossSystem, leftByOwn, mapError, ownMap, solveCross } from './ridge.ts';

/** A decade apart; the best one's neighbours half a decade off are tried after. */
const PENALTIES = [0.1, 1, 10] as const;
const HALF_DECADE = Math.sqrt(10);
/** Where the least of those is the best, decades below it are tried down to this: signals that are one thing seen twice. */
const LIGHTEST = 1e-4;
/** A signal joins for this gain, other features for that one. */
const JOIN_GAIN = 0.001;
const MORE_GAIN = 0.002;
const STILL_GAIN = 0.002;
/** With more equations than this, features beside the plain ones are not tried: each try costs their cube. */
const MOST_TRIED = 512;

/** A fold ready for trying penalties. */
interface Ready {
  readonly judge: OwnTrial['folds'][number]['judge'];
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
  trial: OwnTrial,
  own: OwnChoice,
  variants: readonly (readonly number[])[],
): { readonly cells: (Cell | null)[][]; readonly kept: readonly number[] } {
  const { layout, groups } = trial;
  const count = groups[groups.length - 1] + 1;
  const none = own.cells.map((cells) => cells.map(() => null));
  if (layout.channelCount === 1) return { cells: none, kept: [] };
  const unit = Array.from({ length: count }, (_, g) => ({
    from: groups.indexOf(g) + 1,
    to: groups.lastIndexOf(g) + 1,
  }));
  const owns = trial.folds.map(({ learn }) => ownMap(learn, layout, unit, own.cells));
  const lefts = trial.folds.map(({ learn }, f) => leftByOwn(learn, layout, owns[f]));
  const ready = (kept: readonly number[]): Ready[] =>
    trial.folds.map(({ learn, judge }, f) => {
      return { judge, own: owns[f], left: lefts[f], system: crossSystem(learn, layout, kept) };
    });
  let best = tryAll(trial, ready(variants[0]), variants[0]);
  for (const kept of variants.slice(1)) {
    if (layout.channelCount * kept.length > MOST_TRIED) continue;
    const common = [...new Set(commonOf(trial, best).map((at) => best.penalties[at]))];
    const more = tryThese(trial, ready(kept), kept, common);
    if (gainsSurely(scores(trial, more), scores(trial, best), MORE_GAIN, trial.weights)) best = more;
  }
  return { cells: settle(trial, own, best), kept: best.kept };
}

function tryAll(trial: OwnTrial, ready: readonly Ready[], kept: readonly number[]): Tried {
  let tried = tryThese(trial, ready, kept, PENALTIES);
  for (let least = PENALTIES[0] / 10; least >= LIGHTEST && Math.min(...commonOf(trial, tried)) === 0; least /= 10) {
    tried = joined(tryThese(trial, ready, kept, [least]), tried);
  }
  const totals = tried.errors.map((one) =>
    geometric(
      sumOver(one, trial.layout.steps, () => true),
      trial.weights,
    ),
  );
  const coarse = tried.penalties[leastIndex(totals)];
  return joined(tried, tryThese(trial, ready, kept, [coarse / HALF_DECADE, coarse * HALF_DECADE]));
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
  return { kept, penalties, errors: penalties.map((penalty) => ready.map((fold) => foldErrors(trial, fold, penalty))) };
}

/** (ny · steps) errors of both stages on a fold's judge. */
function foldErrors({ layout }: OwnTrial, { judge, own, left, system }: Ready, penalty: number): Float64Array {
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
  return mapError(judge, layout, map);
}

/** (groups) index of the penalty that serves all signals. */
function commonOf({ layout, groups, weights }: OwnTrial, { errors }: Tried): number[] {
  return Array.from({ length: groups[groups.length - 1] + 1 }, (_, g) =>
    leastIndex(
      errors.map((one) =>
        geometric(
          sumOver(one, layout.steps, (_i, s) => groups[s] === g),
          weights,
        ),
      ),
    ),
  );
}

/** (folds) with each group's penalty. */
function scores(trial: OwnTrial, tried: Tried): number[] {
  const common = commonOf(trial, tried);
  return trial.folds.map((_, f) =>
    common.reduce((sum, at, g) => {
      const [one] = sumOver([tried.errors[at][f]], trial.layout.steps, (_i, s) => trial.groups[s] === g);
      return sum + one;
    }, 0),
  );
}

function settle(trial: OwnTrial, own: OwnChoice, tried: Tried): (Cell | null)[][] {
  const { layout, groups, folds, weights } = trial;
  const common = commonOf(trial, tried);
  const still = lastValueErrors(folds, layout);
  return own.cells.map((cells, i) => {
    const of = (errors: FoldErrors, g: number): number[] =>
      sumOver(errors, layout.steps, (signal, s) => signal === i && groups[s] === g);
    const gains = cells.map(
      (_, g) => geometric(of(tried.errors[common[g]], g), weights) < geometric(of(own.errors, g), weights),
    );
    const total = (errorsOf: (g: number) => FoldErrors): number[] =>
      cells.map((_, g) => of(errorsOf(g), g)).reduce((sum, group) => sum.map((value, f) => value + group[f]));
    const both = total((g) => (gains[g] ? tried.errors[common[g]] : own.errors));
    const alone = total(() => own.errors);
    const isBetter = geometric(both, weights) < geometric(alone, weights) * (1 - JOIN_GAIN);
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
