/**
 * What judges a choice: folds of learning and judging moments, and how their errors are weighed. A long record has folds by
 * rolling origin, each as good a witness as the next. A short one is judged on every stretch in turn by what all the others
 * teach: a third of it learned from is unlike all of it, and what lies ahead is as good a witness as what lies behind. Its
 * stretches also differ more in how much moves at all, and a calm one says little of what the errors will be.
 */
import type { Fold, FoldWeights } from './fold-errors.ts';
import { aboutMeans, addMoments } from './moment-sets.ts';
import type { Moments } from './moments.ts';

/** Folds, their weights, and how near the best a heavier penalty may lie. */
export interface Evidence {
  readonly folds: readonly Fold[];
  readonly weights: FoldWeights;
  /** A heavier penalty within this share of the best is preferred. */
  readonly tie: number;
  /** The same by rolling origin, where the folds are not: who knows the future takes a passing level for a lasting one. */
  readonly onward?: Evidence;
}

/** A record of fewer origins is short. */
const SHORT_ORIGINS = 3000;
/** The power mean between the geometric one and the plain one: of typical errors, not of their squares. */
const SHORT_POWER = 0.5;
const TIES = { short: 0.01, long: 0.001 } as const;
/** Folds by rolling origin learn from at least this many groups where there are enough. */
const FIRST_FOLD = 3;
/** Where the time before the groups is this many times theirs, what each adds to it changes nothing. */
const MUCH_BEFORE = 4;

/**
 * The folds of some groups of origins.
 *
 * shapes  groups in time order, alike, at least two; before: what was learned ahead of them all, alike, or null
 * units   sums over origins
 * throws  nothing
 * source  rolling origin: Tashman (2000); blocks in turn: Bergmeir & Benítez, Information Sciences 191 (2012)
 * cost    O(groups²) additions of moments
 */
export function makeEvidence(groups: readonly Moments[], before: Moments | null = null): Evidence {
  if (before !== null) {
    const folds = onwardFrom(before, groups);
    return { folds, weights: weightsOf(folds, 0), tie: TIES.long };
  }
  if (!isShort(groups) || groups.length < 3) return onwardEvidence(groups, groups);
  const folds = eachInTurn(groups);
  // Each judges what nearly the same groups taught: Nadeau & Bengio, Machine Learning 52 (2003), section 3.
  const doubt = Math.sqrt(1 + folds.length / (folds.length - 1));
  const weights = { ...weightsOf(folds, SHORT_POWER), doubt };
  return { folds, weights, tie: TIES.short, onward: onwardEvidence(groups, groups) };
}

/**
 * The same by rolling origin alone: for what a record grows out of, which those who know the future would not miss.
 *
 * shapes  judged: the same groups as they judge
 * units   as `makeEvidence`
 * throws  nothing
 * source  as `makeEvidence`
 * cost    O(groups) additions of moments
 */
export function onwardEvidence(groups: readonly Moments[], judged: readonly Moments[]): Evidence {
  const short = isShort(groups);
  const folds = onward(groups, judged);
  return { folds, weights: weightsOf(folds, short ? SHORT_POWER : 0), tie: short ? TIES.short : TIES.long };
}

function isShort(groups: readonly Moments[]): boolean {
  return groups.reduce((sum, { origins }) => sum + origins, 0) < SHORT_ORIGINS;
}

/**
 * Weight of each fold: the origins it learned from, since the final fit learns from more than any of them.
 *
 * shapes  result of as many shares as folds
 * units   shares of one
 * throws  nothing
 * source  own choice
 * cost    trivial
 */
export function weightsOf(folds: readonly Fold[], power: number): FoldWeights {
  const total = folds.reduce((sum, { learn }) => sum + learn.origins, 0);
  return { shares: folds.map(({ learn }) => learn.origins / total), power, doubt: 1 };
}

function eachInTurn(groups: readonly Moments[]): Fold[] {
  return groups.map((judge, g) => ({ learn: aboutMeans(addMoments(groups.filter((_, k) => k !== g))), judge }));
}

/** Every group judges what the time before it taught; one and the same where that is long. */
function onwardFrom(before: Moments, groups: readonly Moments[]): Fold[] {
  const own = groups.reduce((sum, { origins }) => sum + origins, 0);
  const isLong = before.origins >= MUCH_BEFORE * own;
  let sum = before;
  let learn = aboutMeans(before);
  return groups.map((judge) => {
    const fold = { learn, judge };
    if (!isLong) {
      sum = addMoments([sum, judge]);
      learn = aboutMeans(sum);
    }
    return fold;
  });
}

function onward(groups: readonly Moments[], judged: readonly Moments[]): Fold[] {
  const first = Math.max(1, Math.min(FIRST_FOLD, groups.length - 2));
  const folds: Fold[] = [];
  let learn = addMoments(groups.slice(0, first));
  for (let g = first; g < groups.length; g++) {
    folds.push({ learn: aboutMeans(learn), judge: judged[g] });
    learn = addMoments([learn, groups[g]]);
  }
  return folds;
}
