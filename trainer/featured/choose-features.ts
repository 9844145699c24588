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
/** Features of a first look. */
const TRIAL_COUNT = 96;
/** Origins that choose; more of them need not be gathered for it. */
export const TRIAL_ORIGINS = 2400;
/**
 * Leading predictive states beside the values, each scaled by what it carries of the forecast to some power: 0 gives all of
 * them one width, 1 measures pasts by how far apart their linear forecasts are.
 */
const SUMMARIES: readonly { states: number; power: number; lags?: readonly number[] }[] = [
  { states: 0, power: 0 },
  { states: 3, power: 0 },
  { states: 8, power: 0.5 },
  { states: 8, power: 1 },
  { states: 16, power: 0.5 },
  { states: 0, power: 0, lags: [1] },
  { states: 0, power: 0, lags: [1, 2, 3] },
  { states: 0, power: 0, lags: [2, 4, 6] },
  { states: 0, power: 0, lags: [1, 2, 3, 5, 8] },
  { states: 0, power: 0, lags: [3, 6, 9, 12, 15] },
] as const;
/** Numbers of a summary; in more dimensions a few hundred features cover nothing. */
const MOST_NUMBERS = 20;
/** Summaries whose widths are tried. */
const FINALISTS = 2;
/** Widths of the kernel, as multiples of the summary's own spread. */
const WIDTHS = [0.5, 2] as const;
const PENALTIES = [1e-6, 1e-5, 1e-4, 1e-3, 1e-2, 0.1, 1] as const;
const LEAST_PENALTY = 1e-6;
const COUNTS = [256, 512, 1024] as const;
/** Channels whose values the features see; with more, distances between points say little. */
const MOST_CHANNELS = 8;
/** Twice as many features are taken only for this gain … */
const COUNT_GAIN = 0.03;
/** … and features at all only for that one at the end, and half of it on the first look. */
const LEAST_GAIN = 0.01;

/** What a choice stands on beside the origins. */
export interface ChoiceInput {
  readonly seed: number;
  readonly horizon: number;
  readonly mostFeatures: number;
  /** What each predictive state carries of the forecast, falling. */
  readonly carried: Float64Array;
}

/**
 * Chooses; null where features do not surely gain.
 *
 * shapes  origins in time order
 * units   standardised
 * throws  TrainError 'fit' from the solves
 * source  rolling origin: Tashman, International Journal of Forecasting 16 (2000)
 * cost    a dozen passes of 96 features over a thinned record, then up to three of more
 */
export function chooseFeatures(all: Origins, input: ChoiceInput): FeatureChoice | null {
  const origins = thinned(all, TRIAL_ORIGINS);
  const groups = cutGroups(origins, input.horizon);
  const without = withoutFeatures(origins, groups);
  const attempt = (setting: FeatureSetting): Tried => tryPenalties(origins, setting, groups, PENALTIES);
  const first = firstSettings(origins, input)
    .map(attempt)
    .sort((a, b) => a.mean - b.mean);
  if (first.length === 0 || !gainsSurely(first[0].errors, without, LEAST_GAIN / 2)) return null;
  const wide = first
    .slice(0, FINALISTS)
    .flatMap(({ setting }) =>
      WIDTHS.map((width) => attempt({ ...setting, scale: setting.scale.map((scale) => scale / width) })),
    );
  let chosen = least([...first, ...wide]);
  for (const count of COUNTS) {
    if (count > input.mostFeatures) break;
    const near = [chosen.penalty / 10, chosen.penalty, 10 * chosen.penalty].filter((one) => one >= LEAST_PENALTY);
    const more = tryPenalties(origins, { ...chosen.setting, count }, groups, near);
    if (more.mean > chosen.mean * (1 - COUNT_GAIN)) break;
    chosen = more;
  }
  return gainsSurely(chosen.errors, without, LEAST_GAIN) ? { setting: chosen.setting, penalty: chosen.penalty } : null;
}

function least(tried: readonly Tried[]): Tried {
  return tried.reduce((best, one) => (one.mean < best.mean ? one : best));
}

/** Summaries that differ, at the width of their own spread. */
function firstSettings(origins: Origins, { seed, carried, mostFeatures }: ChoiceInput): FeatureSetting[] {
  const d = origins.states.length / origins.at.length;
  const nc = origins.folded.values.length;
  const channels = nc <= MOST_CHANNELS ? Array.from({ length: nc }, (_, c) => c) : [];
  const count = Math.min(TRIAL_COUNT, mostFeatures);
  const tried = SUMMARIES.map((summary) => ({ ...summary, states: Math.min(summary.states, d, carried.length) }));
  const nameOf = ({ states, power, lags = [] }: (typeof tried)[number]): string => [states, power, ...lags].join(' ');
  const distinct = tried.filter((one, k) => tried.findIndex((other) => nameOf(other) === nameOf(one)) === k);
  return distinct.flatMap(({ states, power, lags = [] }) => {
    const sizes = [
      ...Array.from({ length: states }, (_, k) => (carried[k] / carried[0]) ** power),
      ...Array.from({ length: channels.length * (1 + lags.length) }, () => 1),
    ];
    const spread = Math.hypot(...sizes);
    const isSmall = spread > 0 && sizes.length <= MOST_NUMBERS;
    return isSmall ? [{ seed, count, states, channels, lags, scale: sizes.map((size) => size / spread) }] : [];
  });
}

/** Every so many origins. */
function thinned(origins: Origins, most: number): Origins {
  const n = origins.at.length;
  const every = Math.ceil(n / most);
  if (every <= 1) return origins;
  const pick = (values: Float64Array): Float64Array => {
    const width = values.length / n;
    return values.filter((_, k) => Math.floor(k / width) % every === 0);
  };
  return {
    at: origins.at.filter((_, k) => k % every === 0),
    states: pick(origins.states),
    folded: origins.folded,
    targets: pick(origins.targets),
    curves: origins.curves,
  };
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
