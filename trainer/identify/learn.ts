/**
 * From a completed history to what the small model is made of: bank and penalties chosen by rolling origin, the map learned
 * from the learning part, its directions found. One pass over the readings; all else is small algebra.
 */
import type { Round } from '@stillwell/runtime/filter';
import { TrainError } from '../errors.ts';
import { cholesky } from '../linalg/cholesky.ts';
import type { Learned } from '../quantise/quantise.ts';
import { type Bank, designBank, featureCount, settlingTicks } from './bank.ts';
import { partition, usableBlocks } from './blocks.ts';
import { findDirections, stateMoments } from './bottleneck.ts';
import { type Choice, choose } from './choose.ts';
import { isWithinReach } from './choose-cross.ts';
import type { EarlierMoments } from './earlier.ts';
import type { Filled } from './fill.ts';
import { gatherCut, gatherSum } from './gather.ts';
import { findCurves, fullReadout } from './horizon-basis.ts';
import { aboutMeans, addInto, pickMoments } from './moment-sets.ts';
import type { MomentInput, Moments } from './moments.ts';
import { splitOwn } from './own-part.ts';
import { type Layout, twoStageMap } from './ridge.ts';
import { withoutRound } from './round.ts';
import { trialSteps } from './step-groups.ts';

/** Where and what to learn. Lengths in ticks from the start of the completed history. */
export interface LearnInput {
  readonly filled: Filled;
  readonly signalCount: number;
  readonly horizon: number;
  readonly periodTicks: number;
  /** Further periods in ticks, the strongest first. */
  readonly otherPeriods: readonly number[];
  readonly learnTicks: number;
  readonly calibrateTicks: number;
  /** Taken away from the history first; null: nothing. */
  readonly round: Round | null;
  /** Of the time before the history, less the same rounds; null: nothing is known of it. */
  readonly earlier: EarlierMoments | null;
}

/** What learning gave. */
export interface LearnOutput {
  readonly choice: Choice;
  readonly learned: Learned;
  /** Moments of the calibration part, of the chosen bank: they judge sizes. */
  readonly calibration: Moments;
  readonly usesLongGaps: boolean;
  /** For people: what was left out, and why. */
  readonly notes: readonly string[];
}

/** More states than this never paid within the byte limits met. */
const MOST_DIRECTIONS = 96;
/** Entries of the map, a dozen copies of which live at once: some 4 GB. */
const MOST_ENTRIES = 4e7;
/** Share by which each variance is raised, and the least share of the largest variance that counts as one. */
const RAISED = 1e-9;
/** Moments of the time before are told to six digits or seven: each variance is raised as far as they need, at most by this. */
const MOST_RAISED = 1e-4;
const SILENT = 1e-6;

/**
 * Learns.
 *
 * shapes  as LearnInput
 * units   standardised
 * throws  TrainError 'fit' from the solves; RangeError if the learning part holds no origin
 * source  file head
 * cost    one pass over the readings, then O(p³)
 */
export function learn(given: LearnInput): LearnOutput {
  const input = lessRound(given);
  const { filled, horizon, learnTicks, calibrateTicks } = input;
  const knownTicks = learnTicks + (input.earlier?.ticks ?? 0);
  const widest = designBank({ ...input, learnTicks: knownTicks, channelCount: filled.values.length });
  const settle = (input.round?.ticks ?? 0) + Math.min(settlingTicks(widest), Math.floor(learnTicks / 8));
  const cut = partition(learnTicks, calibrateTicks, settle, horizon, filled.inLongGap);
  const layout = layoutOf(input, widest);
  requireRoom(layout);
  const trials = trialSteps(horizon);
  const gathered = gatherCut(momentInput(input, widest), layout, cut, trials.steps);
  const before = input.earlier?.of(widest) ?? null;
  const choice = choose(gathered.groups, widest, layout, trials, before);
  const steps = Array.from({ length: horizon }, (_, k) => k + 1);
  const pick = (moments: Moments): Moments => pickMoments(moments, layout, choice.kept, steps);
  const learning = before === null ? gathered.learning : addInto(before, gathered.learning);
  return {
    choice,
    learned: mapAndDirections(pick(learning), { ...layout, featureCount: choice.kept.length }, choice, before !== null),
    calibration: pick(gathered.calibration),
    usesLongGaps: cut.usesLongGaps,
    notes: widthNotes(input, layout, trials.steps.length),
  };
}

/** Refuses what would not fit the memory, before it is asked for. */
function requireRoom({ channelCount, signalCount, featureCount: F, steps }: Layout): void {
  if (channelCount * F * signalCount * steps <= MOST_ENTRIES) return;
  throw new TrainError(
    'fit',
    `${signalCount} signals over a horizon of ${steps} ticks are too many for one model, expected at most about ` +
      `${Math.floor(MOST_ENTRIES / (channelCount * F * signalCount))} ticks ahead. Shorten the horizon or raise the tick, or divide ` +
      'the signals among several site files.',
    { details: { signalCount, steps } },
  );
}

/** What a plant of many channels goes without. */
function widthNotes(input: LearnInput, layout: Layout, trials: number): string[] {
  const { channelCount, featureCount: F } = layout;
  const alone = featureCount(designBank({ ...input, channelCount: 1 }));
  if (F >= alone) return [];
  const cross = isWithinReach({ ...layout, steps: trials }, channelCount * F)
    ? ''
    : ' What signals say of each other is left out as well.';
  return [
    `${channelCount} signals and inputs are many for one model: of each one's past ${F} features are kept in place of ${alone}.${cross} ` +
      'Dividing them among several site files forecasts them better.',
  ];
}

/**
 * Learns once more from the first `ticks` ticks, with what was chosen before.
 *
 * shapes  as LearnInput
 * units   standardised
 * throws  as `learn`
 * source  none
 * cost    one pass over the readings and one fit
 */
export function learnAgain(given: LearnInput, choice: Choice, ticks: number): Learned {
  const input = lessRound(given);
  const layout = layoutOf(input, choice.bank);
  const settle = (input.round?.ticks ?? 0) + Math.min(settlingTicks(choice.bank), Math.floor(ticks / 8));
  const blocks = usableBlocks(settle, ticks, input.horizon, input.filled.inLongGap);
  const own = gatherSum(momentInput(input, choice.bank), blocks);
  const before = input.earlier?.of(choice.bank) ?? null;
  return mapAndDirections(before === null ? own : addInto(before, own), layout, choice, before !== null);
}

/** What learning sees: the history less its rounds. */
function lessRound(input: LearnInput): LearnInput {
  const { round, filled, signalCount } = input;
  return round === null ? input : { ...input, filled: withoutRound(filled, round, signalCount) };
}

function layoutOf(input: LearnInput, bank: Bank): Layout {
  return {
    channelCount: input.filled.values.length,
    signalCount: input.signalCount,
    featureCount: featureCount(bank),
    steps: input.horizon,
  };
}

function mapAndDirections(moments: Moments, layout: Layout, choice: Choice, hasEarlier: boolean): Learned {
  const map = twoStageMap(aboutMeans(moments), layout, choice.plan);
  const covariance = steadyCovariance(moments, layout, hasEarlier);
  const bottleneck = findDirections(covariance, map, layout, MOST_DIRECTIONS);
  const order = bottleneck.carried.length;
  const state = stateMoments(bottleneck.directions, order, covariance, map, layout);
  const curves = findCurves(fullReadout(state, order, layout), state.covariance, order, layout);
  const apart = splitOwn(covariance, map, layout, bottleneck, MOST_DIRECTIONS);
  return { covariance, map, layout, bottleneck, curves, apart };
}

/**
 * Mean products of the features, each variance raised by a hair, so that copies of a signal and silent features leave it
 * positive definite; whatever follows is then consistent with one and the same matrix.
 */
function steadyCovariance(moments: Moments, layout: Layout, hasEarlier: boolean): Float64Array {
  const p = layout.channelCount * layout.featureCount;
  const covariance = moments.features.map((sum) => sum / moments.origins);
  let raised = withRaised(covariance, p, RAISED);
  if (!hasEarlier) return raised;
  for (let share = 10 * RAISED; share < 1.01 * MOST_RAISED && !isPositiveDefinite(raised, p); share *= 10) {
    raised = withRaised(covariance, p, share);
  }
  return raised;
}

function withRaised(covariance: Float64Array, p: number, share: number): Float64Array {
  const raised = covariance.slice();
  let largest = 0;
  for (let f = 0; f < p; f++) largest = Math.max(largest, covariance[f * p + f]);
  for (let f = 0; f < p; f++) {
    raised[f * p + f] += share * (largest > 0 ? Math.max(covariance[f * p + f], SILENT * largest) : 1);
  }
  return raised;
}

function isPositiveDefinite(matrix: Float64Array, p: number): boolean {
  try {
    cholesky(matrix.slice(), p);
    return true;
  } catch (error) {
    if (error instanceof TrainError) return false;
    throw error;
  }
}

function momentInput({ filled, signalCount, horizon }: LearnInput, bank: Bank): MomentInput {
  return { values: filled.values, signalCount, bank, horizon };
}
