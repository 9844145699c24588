/**
 * Chooses bank and penalties by rolling origin over several groups, inside the learning and calibration parts. Errors
 * come from moments, so a fold costs some small solves and no pass over the readings. A single validation block would be
 * quicker still, but one block of a year is often unlike the next.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import type { Bank } from './bank.ts';
import { aboutMeans, addMoments, pickMoments } from './moment-sets.ts';
import type { Moments } from './moments.ts';
import { crossSystem, type Layout, mapError, ownFeatures, ownMap, ridgeOwn } from './ridge.ts';
import { type BankSize, bankSizes, subBank } from './sub-banks.ts';
import { gainsSurely, geometricMean } from './sure-gain.ts';

/** What was chosen, with the validation error it had. */
export interface Choice {
  readonly bank: Bank;
  /** Kept feature indices within a channel of the widest bank. */
  readonly kept: readonly number[];
  /** (ny) null: the own stage does not pay for this signal, which then keeps its last value but for the cross stage. */
  readonly ownPenalty: readonly (number | null)[];
  /** (ny) null: the cross stage does not pay for this signal. */
  readonly crossPenalty: readonly (number | null)[];
  readonly folds: number;
}

const OWN_PENALTIES = [0.001, 0.01, 0.03, 0.1, 0.3, 1, 3] as const;
/** Where the heaviest of those is the best, heavier ones are tried up to this; beyond it lies the last value itself. */
const HEAVIEST_OWN = 100;
/** A decade apart; the best one's neighbours half a decade off are tried after. */
const CROSS_PENALTIES = [0.1, 1, 10] as const;
const HALF_DECADE = Math.sqrt(10);
/** Where the least of those is the best, decades below it are tried down to this: signals that are one thing seen twice. */
const LEAST_CROSS = 1e-4;
/** A smaller bank, or a heavier penalty of the own stage, within this share of the best is preferred. */
const TIE = 0.002;
/** Lags are taken in for this gain: they cost bytes that the state could use. */
const LAG_GAIN = 0.02;
/**
 * A signal departs from the common penalty only for this gain, and takes the cross stage only for that one. Either stage
 * must also gain on doing without it surely: where folds disagree, it would follow chance.
 */
const OWN_GAIN = 0.02;
const CROSS_GAIN = 0.001;
/** A signal leaves its last value for its own map only for this gain. */
const STILL_GAIN = 0.002;
/** Folds learn from at least this many groups where there are enough. */
const FIRST_FOLD = 3;

interface Fold {
  readonly learn: Moments;
  readonly judge: Moments;
}

/**
 * Chooses.
 *
 * shapes  groups in time order, of the widest bank's moments
 * units   standardised
 * throws  TrainError 'fit' from the solves
 * source  rolling origin: Tashman (2000)
 * cost    folds × (banks × penalties × ny own solves + penalties cross solves)
 */
export function choose(groups: readonly Moments[], bank: Bank, layout: Layout): Choice {
  const steps = trialSteps(layout.steps);
  const all = Array.from({ length: layout.featureCount }, (_, f) => f);
  const wide = { ...layout, steps: steps.length };
  const folds = makeFolds(groups.map((moments) => pickMoments(moments, layout, all, steps)));
  const attempt = (size: BankSize): Candidate => {
    const candidate = subBank(bank, size);
    return { ...candidate, size, own: chooseOwn(folds, wide, candidate.kept) };
  };
  const candidates = bankSizes(bank).map(attempt);
  const best = Math.min(...candidates.map((candidate) => candidate.own.error));
  const plain = candidates.find(({ own: { error } }) => error <= best * (1 + TIE)) ?? candidates[0];
  const lagged = bank.lags.length > 0 ? attempt({ ...plain.size, lags: bank.lags.length }) : plain;
  const { kept, own, ...picked } = lagged.own.error < plain.own.error * (1 - LAG_GAIN) ? lagged : plain;
  const trial = { ...wide, featureCount: kept.length };
  const narrow = (moments: Moments): Moments =>
    kept.length === all.length
      ? moments
      : pickMoments(
          moments,
          wide,
          kept,
          Array.from({ length: wide.steps }, (_, k) => k + 1),
        );
  const crossFolds = folds.map((fold) => ({ learn: narrow(fold.learn), judge: narrow(fold.judge) }));
  return {
    bank: picked.bank,
    kept,
    ownPenalty: own.penalties,
    crossPenalty: chooseCross(crossFolds, trial, own.penalties),
    folds: folds.length,
  };
}

/**
 * Steps at which a choice is judged: the first, and evenly on to the horizon.
 *
 * shapes  result ascending, at most 7
 * units   steps
 * throws  nothing
 * source  own choice
 * cost    trivial
 */
export function trialSteps(horizon: number): number[] {
  const steps = new Set<number>([1]);
  for (let k = 1; k <= 6; k++) steps.add(Math.max(1, Math.round((k * horizon) / 6)));
  return [...steps].sort((a, b) => a - b);
}

function makeFolds(groups: readonly Moments[]): Fold[] {
  const first = Math.max(1, Math.min(FIRST_FOLD, groups.length - 2));
  const folds: Fold[] = [];
  let learn = addMoments(groups.slice(0, first));
  for (let g = first; g < groups.length; g++) {
    folds.push({ learn: aboutMeans(learn), judge: groups[g] });
    learn = addMoments([learn, groups[g]]);
  }
  return folds;
}

interface Candidate {
  readonly size: BankSize;
  readonly bank: Bank;
  readonly kept: readonly number[];
  readonly own: ReturnType<typeof chooseOwn>;
}

/** (folds × ny) errors of one choice. */
type FoldErrors = readonly Float64Array[];

/**
 * One penalty for all signals, the one with the least geometric mean error over folds, so that no fold speaks louder than
 * another; a signal departs from it only for a clear gain of its own, since a choice for each alone follows the noise of
 * the folds. A signal that does not surely gain on its last value keeps that.
 */
function chooseOwn(
  folds: readonly Fold[],
  layout: Layout,
  kept: readonly number[],
): { penalties: (number | null)[]; error: number } {
  const signals = Array.from({ length: layout.signalCount }, (_, i) => i);
  const chosenOf = signals.map((i) => ownFeatures(layout, i).filter((f) => kept.includes(f % layout.featureCount)));
  const attempt = (penalty: number): FoldErrors =>
    folds.map((fold) => Float64Array.from(signals, (i) => ownError(fold, layout, i, chosenOf[i], penalty)));
  const penalties: number[] = [...OWN_PENALTIES];
  const errors = penalties.map(attempt);
  const means = errors.map((perFold) => geometricMean(perFold.map(total)));
  while (leastIndex(means) === means.length - 1 && penalties[means.length - 1] * HALF_DECADE <= HEAVIEST_OWN * 1.01) {
    penalties.push(penalties[means.length - 1] * HALF_DECADE);
    errors.push(attempt(penalties[means.length]));
    means.push(geometricMean(errors[means.length].map(total)));
  }
  const common = means.findLastIndex((mean) => mean <= Math.min(...means) * (1 + TIE));
  const still = folds.map(({ judge }) => lastValueErrors(judge, layout));
  const picked = signals.map((i): { penalty: number | null; errors: number[] } => {
    const own = errors.map((perFold) => perFold.map((bySignal) => bySignal[i]));
    const ownMeans = own.map(geometricMean);
    const least = leastIndex(ownMeans);
    const best = ownMeans[least] < ownMeans[common] * (1 - OWN_GAIN) ? least : common;
    const without = still.map((bySignal) => bySignal[i]);
    if (gainsSurely(own[best], without, STILL_GAIN)) return { penalty: penalties[best], errors: own[best] };
    return { penalty: null, errors: without };
  });
  const totals = folds.map((_, f) => picked.reduce((sum, signal) => sum + signal.errors[f], 0));
  return { penalties: picked.map(({ penalty }) => penalty), error: geometricMean(totals) };
}

/** (ny) mean squared errors of the last value, over the steps. */
function lastValueErrors(judge: Moments, layout: Layout): Float64Array {
  return signalErrors(
    judge.energy.map((sum) => sum / judge.origins),
    layout.steps,
  );
}

/** Mean squared error of one signal's own map on the fold's judge, over the steps. */
function ownError(fold: Fold, layout: Layout, signal: number, chosen: Int32Array, penalty: number): number {
  const map = ridgeOwn(fold.learn, layout, signal, chosen, penalty);
  const p = layout.channelCount * layout.featureCount;
  const width = layout.signalCount * layout.steps;
  const { steps } = layout;
  const { features, future, energy, origins } = fold.judge;
  let sum = 0;
  for (let h = 0; h < steps; h++) sum += energy[signal * steps + h];
  const pushed = new Float64Array(steps);
  for (let a = 0; a < chosen.length; a++) {
    pushed.fill(0);
    for (let b = 0; b < chosen.length; b++) {
      const s = features[chosen[a] * p + chosen[b]];
      for (let h = 0; h < steps; h++) pushed[h] += s * map[b * steps + h];
    }
    const row = chosen[a] * width + signal * steps;
    for (let h = 0; h < steps; h++) sum += map[a * steps + h] * (pushed[h] - 2 * future[row + h]);
  }
  return Math.max(0, sum) / (origins * steps);
}

/** A fold ready for trying penalties of the cross stage. */
interface CrossFold {
  readonly judge: Moments;
  readonly own: Float64Array;
  readonly system: ReturnType<typeof crossSystem>;
}

/** One penalty for the cross stage likewise; a signal is left out of it where it does not gain. */
function chooseCross(folds: readonly Fold[], layout: Layout, penalties: readonly (number | null)[]): (number | null)[] {
  if (layout.channelCount === 1) return [null];
  const ready = folds.map((fold): CrossFold => {
    const own = ownMap(fold.learn, layout, penalties);
    return { judge: fold.judge, own, system: crossSystem(fold.learn, layout, own) };
  });
  const attempt = (penalty: number): { penalty: number; errors: Float64Array[]; mean: number } => {
    const errors = ready.map((fold) => crossErrors(fold, layout, penalty));
    return { penalty, errors, mean: geometricMean(errors.map(total)) };
  };
  const tried = CROSS_PENALTIES.map(attempt);
  const best = (): (typeof tried)[number] => tried[leastIndex(tried.map(({ mean }) => mean))];
  for (let least = CROSS_PENALTIES[0] / 10; best().penalty < 11 * least && least >= LEAST_CROSS; least /= 10) {
    tried.push(attempt(least));
  }
  const coarse = best().penalty;
  tried.push(attempt(coarse / HALF_DECADE), attempt(coarse * HALF_DECADE));
  const common = best();
  const still = folds.map(({ judge }) => lastValueErrors(judge, layout));
  const alone = ready.map(({ judge, own }) => signalErrors(mapError(judge, layout, own), layout.steps));
  return Array.from({ length: layout.signalCount }, (_, i) => {
    const without = alone.map((signals) => signals[i]);
    const joined = common.errors.map((signals) => signals[i]);
    const isBetter = geometricMean(joined) < geometricMean(without) * (1 - CROSS_GAIN);
    const lasting = still.map((signals) => signals[i]);
    return isBetter && gainsSurely(joined, lasting, STILL_GAIN) ? common.penalty : null;
  });
}

/** (ny) errors of both stages on a fold's judge. */
function crossErrors({ judge, own, system }: CrossFold, layout: Layout, penalty: number): Float64Array {
  const p = layout.channelCount * layout.featureCount;
  const map = system.right.slice();
  solveCholesky(cholesky(system.gram(penalty), p), p, map, layout.signalCount * layout.steps);
  for (let at = 0; at < map.length; at++) map[at] += own[at];
  return signalErrors(mapError(judge, layout, map), layout.steps);
}

/** (ny) mean over the steps. */
function signalErrors(errors: Float64Array, steps: number): Float64Array {
  const out = new Float64Array(errors.length / steps);
  for (let k = 0; k < errors.length; k++) out[Math.floor(k / steps)] += errors[k] / steps;
  return out;
}

function total(values: Float64Array): number {
  return values.reduce((sum, value) => sum + value, 0);
}

function leastIndex(values: readonly number[]): number {
  let best = 0;
  for (let k = 1; k < values.length; k++) if (values[k] < values[best]) best = k;
  return best;
}
