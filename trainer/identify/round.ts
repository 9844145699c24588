/**
 * Whether taking away what a signal did a round ago (a period, a week) makes it easier to forecast, by rolling origin on each
 * signal's own past. A week whose days differ is too long for resonators and lags; taken away, the rest has no week left.
 */
import { MAX_ROUND_TICKS } from '@stillwell/protocol';
import type { Round } from '@stillwell/runtime/filter';
import { type Bank, designBank, featureCount, settlingTicks } from './bank.ts';
import { partition } from './blocks.ts';
import { type OwnTrial, settleOwn, tryOwn } from './choose-own.ts';
import type { Filled } from './fill.ts';
import { type FoldWeights, gainsSurely, powerMean, sumOver } from './fold-errors.ts';
import { onwardEvidence } from './folds.ts';
import type { LearnInput } from './learn.ts';
import { aboutMeans, addMoments, pickMoments } from './moment-sets.ts';
import { gatherMoments, type Moments } from './moments.ts';
import { trialSteps } from './step-groups.ts';

const WEEK_MS = 7 * 86_400_000;
/** The learning part must hold this many rounds: one to take away, and two to learn what is left. */
const LEAST_ROUNDS = 3;
/** A plant whose rounds wander is better served by half of the last one. */
const WEIGHTS = [1, 0.5] as const;
/** A round must gain this share of the squared error surely: it costs memory, and doubles what is noise in the last one. */
const ROUND_GAIN = 0.02;
const ROUND_CHANCE = 0.05;
/** A longer round must gain this over a shorter one: it leaves less of the record to learn from. */
const LONGER_GAIN = 0.1;
/** Where there is a pattern to be seen, as large a gain is believed without being sure. */
const LARGE_GAIN = 0.15;
/** Share of a signal's changes that a pattern must explain before a round may count its trend as a gain. */
const LEAST_PATTERN = 0.1;
/** Penalties that tell whether a round pays; the proper choice comes after. */
const PENALTIES = [0.01, 0.1, 1] as const;
/** Bytes of all signals' rounds together: the gateway's snapshot, bank included, must stay below MAX_SNAPSHOT_BYTES. */
const MOST_ROUND_BYTES = 96 * 1024;
/** Signals beyond these are not tried: the time is better spent on their map. */
const MOST_SIGNALS = 32;

/**
 * The round that pays, or null.
 *
 * shapes  weight (ny); longest the longest that may be tried
 * units   ticks
 * throws  TrainError 'fit' from the solves
 * source  seasonal differencing chosen by rolling origin: Tashman (2000)
 * cost    ny × rounds × weights gatherings of one signal's moments, and their own solves
 */
export function chooseRound(input: LearnInput, tickMs: number, longest = Number.POSITIVE_INFINITY): Round | null {
  const rounds = roundsWorthTrying(input, tickMs).filter((ticks) => ticks <= longest);
  if (rounds.length === 0 || input.signalCount > MOST_SIGNALS) return null;
  const gaining = rounds
    .toSorted((a, b) => a - b)
    .map((ticks) => weightsThatPay(input, ticks))
    .filter(({ weight }) => weight.some((w) => w > 0));
  if (gaining.length < 2) return gaining[0] ?? null;
  // From the same origins: what is left after the longest is little to learn from, and flatters whatever gains on it.
  const skip = Math.max(...rounds);
  const errors = gaining.map(({ ticks, weight }) => {
    const bySignal = Array.from(weight, (w, i) => {
      const hasPattern = patternShare(input, i, ticks) >= LEAST_PATTERN;
      const left = ownErrors(input, i, { ticks, weight: Float64Array.of(w) }, skip, hasPattern);
      return Math.log(Math.max(powerMean(left.errors, left.weights), Number.MIN_VALUE));
    });
    return bySignal.reduce((sum, error) => sum + error);
  });
  const most = Math.min(...errors) - input.signalCount * Math.log(1 - LONGER_GAIN);
  return gaining[errors.findIndex((error) => error <= most)];
}

/** A round with the weight that pays for each signal; 0: none. */
function weightsThatPay(input: LearnInput, ticks: number): Round {
  const weight = Float64Array.from({ length: input.signalCount }, (_, i) => {
    const hasPattern = patternShare(input, i, ticks) >= LEAST_PATTERN;
    // With a round of no weight, so that the origins are those that a round has, whose gaps show twice.
    const plain = ownErrors(input, i, { ticks, weight: Float64Array.of(0) }, ticks, hasPattern);
    const tried = WEIGHTS.map((w) => ({
      w,
      ...ownErrors(input, i, { ticks, weight: Float64Array.of(w) }, ticks, hasPattern),
    }));
    const mean = (errors: readonly number[]): number => powerMean(errors, plain.weights);
    const [first, second] = tried;
    const least = mean(second.errors) < mean(first.errors) ? second : first;
    const isSure = gainsSurely(least.errors, plain.errors, ROUND_GAIN, plain.weights, ROUND_CHANCE);
    const isLarge = hasPattern && mean(least.errors) < mean(plain.errors) * (1 - LARGE_GAIN);
    return isSure || isLarge ? least.w : 0;
  });
  return { ticks, weight };
}

function roundsWorthTrying(input: LearnInput, tickMs: number): number[] {
  const { horizon, learnTicks, periodTicks, otherPeriods } = input;
  const week = WEEK_MS / tickMs;
  return [...new Set([periodTicks, week, ...otherPeriods])].filter(
    (ticks) =>
      Number.isInteger(ticks) &&
      ticks > 1 &&
      ticks >= horizon &&
      ticks <= MAX_ROUND_TICKS &&
      8 * (ticks + 1) * input.signalCount <= MOST_ROUND_BYTES &&
      learnTicks >= LEAST_ROUNDS * ticks,
  );
}

/**
 * Share of the variance of a signal's changes from tick to tick that their means by phase explain, less what as many means of
 * noise would. Changes, since a trend has none of it.
 */
function patternShare({ filled, learnTicks }: LearnInput, signal: number, ticks: number): number {
  const z = filled.values[signal];
  // What stands in a long gap was filled in by phase, and would count as a pattern.
  const isSeen = (t: number): boolean => filled.inLongGap[t] === 0 && filled.inLongGap[t - 1] === 0;
  let seen = 0;
  const sums = new Float64Array(ticks);
  const counts = new Float64Array(ticks);
  let mean = 0;
  for (let t = 1; t < learnTicks; t++) {
    if (!isSeen(t)) continue;
    sums[t % ticks] += z[t] - z[t - 1];
    counts[t % ticks]++;
    mean += z[t] - z[t - 1];
    seen++;
  }
  mean /= Math.max(1, seen);
  let total = 0;
  let left = 0;
  for (let t = 1; t < learnTicks; t++) {
    if (!isSeen(t)) continue;
    const change = z[t] - z[t - 1];
    const phase = sums[t % ticks] / counts[t % ticks];
    total += (change - mean) * (change - mean);
    left += (change - phase) * (change - phase);
  }
  // R² adjusted for the number of means (Theil 1961).
  return total > 0 ? 1 - left / Math.max(1, seen - ticks) / (total / (seen - 1)) : 0;
}

/** Errors by fold of one signal's own map on what is left of it, from the origins after `skip` ticks. */
function ownErrors(
  input: LearnInput,
  signal: number,
  round: Round,
  skip: number,
  hasPattern: boolean,
): { readonly errors: number[]; readonly weights: FoldWeights } {
  const { filled, horizon, learnTicks, calibrateTicks, periodTicks } = input;
  const wish = { periodTicks, otherPeriods: [], horizon, learnTicks, channelCount: 1 };
  const bank: Bank = { ...designBank(wish), lags: [], hasLevel: false };
  const { values, inLongGap } = withoutRound({ ...filled, values: [filled.values[signal]] }, round, 1);
  const settle = skip + Math.min(settlingTicks(bank), Math.floor(learnTicks / 8));
  const cut = partition(learnTicks, calibrateTicks, settle, horizon, inLongGap);
  const blocks = cut.groups.flat();
  const moments = gatherMoments({ values, signalCount: 1, bank, horizon }, blocks);
  const trials = trialSteps(horizon);
  const features = featureCount(bank);
  const layout = { channelCount: 1, signalCount: 1, featureCount: features, steps: horizon };
  const kept = Array.from({ length: features }, (_, f) => f);
  const groups = cut.groups.flatMap((own) => {
    const parts = moments.filter((_, k) => own.includes(blocks[k]));
    return parts.length > 0 ? [pickMoments(addMoments(parts), layout, kept, trials.steps)] : [];
  });
  // Without a pattern about its means too: a record that only rises would otherwise take its last round's rise for one.
  const evidence = onwardEvidence(groups, hasPattern ? groups : groups.map(withoutTrend));
  const trial: OwnTrial = { ...evidence, layout: { ...layout, steps: trials.steps.length }, groups: trials.groups };
  const tried = tryOwn(trial, kept, PENALTIES);
  const { errors } = settleOwn(trial, () => tried);
  return { errors: sumOver(errors, trials.steps.length, () => true), weights: evidence.weights };
}

/** Moments about the means of a judging group itself. */
function withoutTrend(moments: Moments): Moments {
  const { origins, futureSums } = moments;
  const energy = moments.energy.map((sum, k) => sum - (futureSums[k] * futureSums[k]) / origins);
  return { ...aboutMeans(moments), energy };
}

/**
 * A completed history less its rounds, as the filter's kernel sees it: before the first round the first value stands for the
 * past. A gap shows twice, where it is and a round later.
 *
 * shapes  filled as Filled, its first `signalCount` channels signals
 * units   standardised
 * throws  nothing
 * source  runtime/filter/round.ts
 * cost    O(ny T)
 */
export function withoutRound(filled: Filled, { ticks, weight }: Round, signalCount: number): Filled {
  const values = filled.values.map((z, c) => {
    const w = c < signalCount ? weight[c] : 0;
    return w === 0 ? z : z.map((value, t) => value - w * z[Math.max(0, t - ticks)]);
  });
  const inLongGap = filled.inLongGap.slice();
  for (let t = ticks; t < inLongGap.length; t++) {
    if (filled.inLongGap[t] === 0) inLongGap[t] = filled.inLongGap[t - ticks];
  }
  return { ...filled, values, inLongGap };
}
