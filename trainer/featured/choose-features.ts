/**
 * Chooses what the features see, their width, number and penalty by rolling origin over groups of origins, and whether they
 * are worth having at all: a plant that is linear gets none, after a quick look.
 */
import { gainsSurely, geometricMean } from '../identify/sure-gain.ts';
import { ridgeFeatures } from './correction.ts';
import {
  addFeatureMoments,
  type FeatureMoments,
  type FeatureSetting,
  featureError,
  gatherFeatures,
} from './feature-moments.ts';
import type { Origins } from './origins.ts';

/** What was chosen. */
export interface FeatureChoice {
  readonly setting: FeatureSetting;
  readonly penalty: number;
}

const GROUPS = 6;
/** Folds learn from at least this many groups. */
const FIRST_FOLD = 3;
const TRIAL_COUNT = 128;
/** States beside the values, and widths as multiples of the square root of the number of dimensions. */
const STATES = [0, 3, 8] as const;
const WIDTHS = [0.5, 1, 2] as const;
const PENALTIES = [1e-6, 1e-5, 1e-4, 1e-3, 1e-2, 0.1, 1] as const;
const COUNTS = [256, 512, 1024] as const;
/** Channels whose values the features see; with more, distances between points say little. */
const MOST_CHANNELS = 8;
/** Twice as many features are taken only for this gain … */
const COUNT_GAIN = 0.01;
/** … and features at all only for that one, on the first look and at the end. */
const LEAST_GAIN = 0.01;

/**
 * Chooses; null where features do not surely gain.
 *
 * shapes  origins in time order
 * units   standardised
 * throws  TrainError 'fit' from the solves
 * source  rolling origin: Tashman, International Journal of Forecasting 16 (2000)
 * cost    some ten passes of 128 features, then up to three of more
 */
export function chooseFeatures(
  origins: Origins,
  seed: number,
  horizon: number,
  mostFeatures: number,
): FeatureChoice | null {
  const d = origins.states.length / origins.at.length;
  const nc = origins.values.length / origins.at.length;
  const channels = nc <= MOST_CHANNELS ? Array.from({ length: nc }, (_, c) => c) : [];
  const base = { seed, count: TRIAL_COUNT, channels };
  const groups = cutGroups(origins, horizon);
  const without = withoutFeatures(origins, groups);
  let best: Tried | null = null;
  const attempt = (setting: FeatureSetting): Tried => {
    const tried = tryPenalties(origins, setting, groups, PENALTIES);
    if (best === null || tried.mean < best.mean) best = tried;
    return tried;
  };
  const states = [...new Set(STATES.map((count) => Math.min(count, d)))].filter((s) => s + channels.length > 0);
  for (const count of states) {
    const setting = { ...base, states: count };
    attempt({ ...setting, width: Math.sqrt(count + channels.length) });
  }
  const first = best as unknown as Tried;
  if (!(first.mean < geometricMean(without) * (1 - LEAST_GAIN / 2))) return null;
  for (const width of WIDTHS) {
    if (width !== 1) attempt({ ...first.setting, width: width * first.setting.width });
  }
  let chosen = best as unknown as Tried;
  for (const count of COUNTS) {
    if (count > mostFeatures) break;
    const near = [chosen.penalty / 10, chosen.penalty, 10 * chosen.penalty];
    const more = tryPenalties(origins, { ...chosen.setting, count }, groups, near);
    if (more.mean > chosen.mean * (1 - COUNT_GAIN)) break;
    chosen = more;
  }
  return gainsSurely(chosen.errors, without, LEAST_GAIN) ? { setting: chosen.setting, penalty: chosen.penalty } : null;
}

interface Tried {
  readonly setting: FeatureSetting;
  readonly penalty: number;
  readonly errors: readonly number[];
  readonly mean: number;
}

/** Origins from `from` to before `learnTo` may be learned from, those to before `to` judged. */
interface Group {
  readonly from: number;
  readonly learnTo: number;
  readonly to: number;
}

/** Equal runs of origins, the last of each too near to the next for learning what that one judges. */
function cutGroups({ at }: Origins, horizon: number): Group[] {
  return Array.from({ length: GROUPS }, (_, g) => {
    const from = Math.round((g * at.length) / GROUPS);
    const to = Math.round(((g + 1) * at.length) / GROUPS);
    let learnTo = to;
    while (to < at.length && learnTo > from && at[learnTo - 1] + horizon >= at[to]) learnTo--;
    return { from, learnTo, to };
  });
}

function withoutFeatures({ at, targets }: Origins, groups: readonly Group[]): number[] {
  const m = targets.length / at.length;
  return groups.slice(FIRST_FOLD).map(({ from, to }) => {
    let sum = 0;
    for (let k = from * m; k < to * m; k++) sum += targets[k] * targets[k];
    return sum / (to - from);
  });
}

function tryPenalties(
  origins: Origins,
  setting: FeatureSetting,
  groups: readonly Group[],
  penalties: readonly number[],
): Tried {
  const learned = groups.map(({ from, learnTo }) => gatherFeatures(origins, setting, from, learnTo));
  const judged = groups.map(({ learnTo, to }, g) =>
    g < FIRST_FOLD || learnTo === to
      ? learned[g]
      : addFeatureMoments([learned[g], gatherFeatures(origins, setting, learnTo, to)]),
  );
  let best: Tried | null = null;
  let known: FeatureMoments = addFeatureMoments(learned.slice(0, FIRST_FOLD));
  const folds: { learn: FeatureMoments; judge: FeatureMoments }[] = [];
  for (let g = FIRST_FOLD; g < GROUPS; g++) {
    folds.push({ learn: known, judge: judged[g] });
    known = addFeatureMoments([known, learned[g]]);
  }
  for (const penalty of penalties) {
    const errors = folds.map(({ learn, judge }) => {
      const squares = featureError(judge, ridgeFeatures(learn, penalty));
      return squares.reduce((sum, value) => sum + value, 0) / judge.origins;
    });
    const mean = geometricMean(errors);
    if (best === null || mean < best.mean) best = { setting, penalty, errors, mean };
  }
  return best as unknown as Tried;
}
