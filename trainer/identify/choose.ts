/**
 * Chooses bank, features and penalties over several groups of origins inside the learning and calibration parts: by rolling
 * origin, or in a short record by each group in turn. Errors come from moments, so a fold costs some small solves and no pass
 * over the readings. A single validation block would be quicker still, but one block of a year is often unlike the next.
 */
import { type Bank, featureCount } from './bank.ts';
import { chooseCross } from './choose-cross.ts';
import { type OwnChoice, type OwnErrors, type OwnTrial, settleOwn, tryOwn } from './choose-own.ts';
import { gainsSurely, powerMean, sumOver } from './fold-errors.ts';
import { makeEvidence } from './folds.ts';
import { pickMoments } from './moment-sets.ts';
import type { Moments } from './moments.ts';
import type { Cell, Layout, TwoStagePlan } from './ridge.ts';
import { stepGroups, type trialSteps } from './step-groups.ts';
import { type BankSize, bankSizes, subBank } from './sub-banks.ts';

/** What was chosen. */
export interface Choice {
  readonly bank: Bank;
  /** Kept feature indices within a channel of the widest bank. */
  readonly kept: readonly number[];
  /** Cells of both stages; features as the chosen bank counts them. */
  readonly plan: TwoStagePlan;
  /** (ny) lightest penalty of the own stage; null: it does not pay for this signal, which keeps its last value. */
  readonly ownPenalty: readonly (number | null)[];
  /** (ny) lightest penalty of the cross stage; null: it does not pay for this signal. */
  readonly crossPenalty: readonly (number | null)[];
  readonly folds: number;
}

/** A smaller bank within this share of the best is preferred. */
const TIE = 0.002;
/** Lags are taken in for this sure gain, in the groups of steps where it is there. */
const LAG_GAIN = 0.002;
/** Folds in turn find lags in every other record that has none, unless they must be surer. */
const LAG_CHANCES = { onward: 0.1, inTurn: 0.005 } as const;
/**
 * A signal takes the level for this gain, surer than others: where the level of a plant shifts later, it will draw forecasts
 * to the old one. All signals and folds together are better evidence of a plant that returns to its mean than one signal.
 */
const LEVEL_GAIN = 0.005;
const LEVEL_CHANCE = 0.005;
const JOINT_CHANCE = 0.05;

/**
 * Chooses.
 *
 * shapes  groups in time order, of the widest bank's moments at the trial steps; layout of all steps; before those of the
 *         time before all groups, at all steps, or null
 * units   standardised
 * throws  TrainError 'fit' from the solves
 * source  rolling origin: Tashman (2000)
 * cost    folds × (banks × penalties × ny own solves + penalties cross solves)
 */
export function choose(
  groups: readonly Moments[],
  bank: Bank,
  layout: Layout,
  trials: ReturnType<typeof trialSteps>,
  before: Moments | null = null,
): Choice {
  const all = Array.from({ length: layout.featureCount }, (_, f) => f);
  const trial: OwnTrial = {
    ...makeEvidence(groups, before && pickMoments(before, layout, all, trials.steps)),
    layout: { ...layout, steps: trials.steps.length },
    groups: trials.groups,
  };
  const { size, plain, plainLevel, lasting } = chooseSize(trial, bank);
  const lagged = { ...size, lags: bank.lags.length };
  const withLags = bank.lags.length > 0 ? variant(trial, bank, lagged, plain) : plain;
  const isLagged = laggedGroups(trial, plain, withLags);
  const hasLags = isLagged.includes(true);
  const lagsLevel = hasLags ? variant(trial, bank, { ...lagged, level: 1 }, plainLevel) : plainLevel;
  const own = joinLevels(
    trial,
    settleOwn(trial, (g) => (isLagged[g] ? withLags : plain)),
    settleOwn(trial, (g) => (isLagged[g] ? lagsLevel : plainLevel)),
    lasting,
  );
  // What other channels did long ago may matter where a signal's own distant past does not.
  const slow = subBank(bank, { ...size, means: bank.decays.length, level: 1 }).kept;
  const crossFeatures = [plain.kept, ...(hasLags ? [withLags.kept] : []), plainLevel.kept, slow];
  return describe(bank, layout, trial, own, chooseCross(trial, own, crossFeatures));
}

/** A bank's size without lags, and the errors of its features without and with the level. */
interface Sized {
  readonly size: BankSize;
  readonly plain: OwnErrors;
  readonly plainLevel: OwnErrors;
  readonly lasting: readonly boolean[];
}

/** The bank's size without lags, by the own stage alone. */
function chooseSize(trial: OwnTrial, bank: Bank): Sized {
  const candidates = bankSizes(bank).map((size) => {
    const plain = tryOwn(trial, subBank(bank, size).kept, null);
    const plainLevel = variant(trial, bank, { ...size, level: 1 }, plain);
    const lasting = lastingLevels(trial, plain, plainLevel);
    const { errors } = joinLevels(
      trial,
      settleOwn(trial, () => plain),
      settleOwn(trial, () => plainLevel),
      lasting,
    );
    return {
      size,
      plain,
      plainLevel,
      lasting,
      error: powerMean(
        sumOver(errors, trial.layout.steps, () => true),
        trial.weights,
      ),
    };
  });
  const best = Math.min(...candidates.map(({ error }) => error));
  return candidates.find(({ error }) => error <= best * (1 + TIE)) ?? candidates[0];
}

/** Errors with other features, at the penalties that were the best ones and their neighbours. */
function variant(trial: OwnTrial, bank: Bank, size: BankSize, plain: OwnErrors): OwnErrors {
  const { penalties, common } = plain;
  const among = penalties.slice(Math.max(0, Math.min(...common) - 2), Math.max(...common) + 2);
  return tryOwn(trial, subBank(bank, size).kept, among);
}

/** (groups) whether lags gain surely there. */
function laggedGroups(trial: OwnTrial, plain: OwnErrors, withLags: OwnErrors): boolean[] {
  const { layout, groups } = trial;
  const chance = trial.onward === undefined ? LAG_CHANCES.onward : LAG_CHANCES.inTurn;
  const without = settleOwn(trial, () => plain).errors;
  const within = settleOwn(trial, () => withLags).errors;
  return Array.from({ length: groups[groups.length - 1] + 1 }, (_, g) => {
    const inGroup = (_i: number, s: number): boolean => groups[s] === g;
    const gained = sumOver(within, layout.steps, inGroup);
    return gainsSurely(gained, sumOver(without, layout.steps, inGroup), LAG_GAIN, trial.weights, chance);
  });
}

/** (ny) whether the level gains by rolling origin too. */
function lastingLevels(trial: OwnTrial, plain: OwnErrors, plainLevel: OwnErrors): boolean[] {
  const { onward, layout } = trial;
  const signals = Array.from({ length: layout.signalCount }, (_, i) => i);
  if (onward === undefined) return signals.map(() => true);
  const ahead: OwnTrial = { ...trial, ...onward };
  const [flat, steep] = [plain, plainLevel].map(({ kept, penalties }) => {
    const tried = tryOwn(ahead, kept, penalties);
    return settleOwn(ahead, () => tried).errors;
  });
  return signals.map((i) => {
    const of = (errors: OwnChoice['errors']): number[] => sumOver(errors, layout.steps, (signal) => signal === i);
    return gainsSurely(of(steep), of(flat), LEVEL_GAIN, onward.weights);
  });
}

/**
 * Each signal with the level where that gains surely: for it alone, or for all signals together and not at its own cost.
 */
function joinLevels(trial: OwnTrial, flat: OwnChoice, steep: OwnChoice, onward: readonly boolean[]): OwnChoice {
  const { weights, layout } = trial;
  const errors = flat.errors.map((fold) => fold.slice());
  const ofSignal = (choice: OwnChoice, i: number): number[] =>
    sumOver(choice.errors, layout.steps, (signal) => signal === i);
  const pairs = flat.cells.map((_, i) => ({ with: ofSignal(steep, i), without: ofSignal(flat, i) }));
  const isJoint = gainsSurely(
    pairs.flatMap((pair) => pair.with),
    pairs.flatMap((pair) => pair.without),
    LEVEL_GAIN,
    { ...weights, shares: pairs.flatMap(() => weights.shares.map((share) => share / pairs.length)) },
    JOINT_CHANCE,
  );
  const cells = flat.cells.map((without, i) => {
    const pair = pairs[i];
    const isWorth = isJoint && powerMean(pair.with, weights) < powerMean(pair.without, weights) * (1 - LEVEL_GAIN);
    if (!onward[i] || (!isWorth && !gainsSurely(pair.with, pair.without, LEVEL_GAIN, weights, LEVEL_CHANCE)))
      return without;
    steep.errors.forEach((fold, f) => {
      errors[f].set(fold.subarray(i * layout.steps, (i + 1) * layout.steps), i * layout.steps);
    });
    return steep.cells[i];
  });
  return { cells, errors };
}

/** The choice in terms of a bank that holds what some cell uses, and no more. */
function describe(
  bank: Bank,
  layout: Layout,
  trial: OwnTrial,
  own: OwnChoice,
  cross: readonly (readonly (Cell | null)[])[],
): Choice {
  const used = new Set([...own.cells, ...cross].flat().flatMap((cell) => cell?.kept ?? []));
  const small = smallestBank(bank, used);
  const place = new Map(small.kept.map((f, at) => [f, at]));
  const moved = (cells: readonly (readonly (Cell | null)[])[]): (Cell | null)[][] =>
    cells.map((groups) =>
      groups.map((cell) => cell && { penalty: cell.penalty, kept: cell.kept.map((f) => place.get(f) ?? 0) }),
    );
  const lightest = (cells: readonly (Cell | null)[]): number | null => {
    const present = cells.flatMap((cell) => (cell === null ? [] : [cell.penalty]));
    return present.length > 0 ? Math.min(...present) : null;
  };
  return {
    ...small,
    plan: { groups: stepGroups(layout.steps), own: moved(own.cells), cross: moved(cross) },
    ownPenalty: own.cells.map(lightest),
    crossPenalty: cross.map(lightest),
    folds: trial.folds.length,
  };
}

/** The sub-bank of the features used, or the first mean alone where none is. */
function smallestBank(
  bank: Bank,
  used: ReadonlySet<number>,
): { readonly bank: Bank; readonly kept: readonly number[] } {
  const sizes = bankSizes(bank).flatMap((size) =>
    [0, bank.lags.length].flatMap((lags) => [0, 1].map((level): BankSize => ({ ...size, lags, level }))),
  );
  const fitting = sizes
    .filter(({ level }) => level === 0 || bank.hasLevel === true)
    .map((size) => subBank(bank, size))
    .filter(({ kept }) => [...used].every((f) => kept.includes(f)))
    .sort((a, b) => featureCount(a.bank) - featureCount(b.bank));
  return fitting[0];
}
