/**
 * Says in plain words whether the model beat the obvious guesses on history it never saw. The gate is deliberately
 * simple: skill over the strongest simple rival, averaged over the horizon, of at least a hundredth on the mean of the
 * signals, each counted no worse than -1, so that one signal that stands nearly still does not outweigh all others. Beside it
 * stands whether the gain is sure: a test of the losses, and in how many stretches of the judged time it shows.
 */
import { type Block, skillByBlock } from './blocks.ts';
import { compareLosses, type LossTest } from './diebold-mariano.ts';
import type { Hindcast } from './hindcast.ts';
import { SIMPLE_RIVALS } from './rivals.ts';
import { meanOf, skillScore } from './scores.ts';
import { verdictSteps } from './steps.ts';

export { verdictSteps } from './steps.ts';

/** Less counts as none: where nothing can be forecast, as in a random walk, chance alone gives a few thousandths. */
const LEAST_SKILL = 0.01;

/** A signal with fewer judged readings says nothing of skill, however lucky they are. */
const LEAST_READINGS = 16;

/** A signal counts as no worse than this in the mean. */
const LEAST_COUNTED = -1;

/** A gain or loss is sure where chance would give it less often than this. */
const SURE = 0.05;

/** Signals named in the sentence for the whole model, at most. */
const MOST_NAMED = 3;

/** Worse than this is all one: the sentence says a hundredfold. */
const MOST_WORSE = 99;

/** The judge's word on one signal. */
export interface Verdict {
  readonly signal: string;
  /** Rival with the smallest mean squared error over the whole horizon. */
  readonly bestRival: string;
  /** 1 - mse/mse of the strongest rival, both averaged over the whole horizon. */
  readonly skill: number;
  /** The same at single steps, in the order of `Verdicts.horizons`, against the strongest rival at that step. */
  readonly skillAt: readonly number[];
  /** Share of held-out readings inside the bounds, all steps together. */
  readonly coverage: number;
  /** Against `bestRival`, on the mean squared error of whole paths; null where there are too few origins. */
  readonly test: LossTest | null;
  /** Skill against `bestRival` by stretches of the judged time, in order. */
  readonly blocks: readonly Block[];
  readonly sentence: string;
}

/** The judge's word on the whole model. */
export interface Verdicts {
  /** Steps of `skillAt`: 1, H/4, H/2 and H without repeats. */
  readonly horizons: readonly number[];
  readonly signals: readonly Verdict[];
  /** Mean of the signals' skills, each no less than -1. */
  readonly meanSkill: number;
  readonly hasSkill: boolean;
  /** One sentence for the whole model. */
  readonly sentence: string;
}

/**
 * Judges a hindcast.
 *
 * shapes  as Hindcast
 * units   skill and coverage as shares
 * throws  nothing; a signal with fewer than 16 judged readings has skill NaN and says so
 * source  skill score: Murphy, Monthly Weather Review 116 (1988); test: see diebold-mariano.ts
 * cost    O(ny · origins · horizon)
 */
export function judge(hindcast: Hindcast): Verdicts {
  const horizons = verdictSteps(hindcast.horizon);
  const signals = hindcast.signals.map((_, i) => judgeSignal(hindcast, i, horizons));
  const skills = Float64Array.from(signals, (verdict) => Math.max(LEAST_COUNTED, verdict.skill));
  const meanSkill = meanOf(skills);
  const better = signals.filter((verdict) => verdict.skill >= LEAST_SKILL).length;
  const hasSkill = better > 0 && meanSkill >= LEAST_SKILL;
  return Object.freeze({
    horizons,
    signals,
    meanSkill,
    hasSkill,
    sentence: wholeSentence(signals, better, meanSkill, hasSkill),
  });
}

/** Index of the strongest simple rival over some steps of a signal; -1 where there is none to compare with. */
export function strongestSimple(hindcast: Hindcast, signal: number, from: number, to: number): number {
  const cells = hindcast.signals.length * hindcast.horizon;
  let best = -1;
  let least = Number.POSITIVE_INFINITY;
  hindcast.rivals.forEach((name, r) => {
    if (!SIMPLE_RIVALS.includes(name)) return;
    const row = r * cells + signal * hindcast.horizon;
    const mse = meanOf(hindcast.rivalMse, row + from, row + to);
    if (mse >= least || Number.isNaN(mse)) return;
    least = mse;
    best = r;
  });
  return best;
}

function judgeSignal(hindcast: Hindcast, i: number, horizons: readonly number[]): Verdict {
  const H = hindcast.horizon;
  const cells = hindcast.signals.length * H;
  const isKnown = hindcast.count[i * H] >= LEAST_READINGS;
  const skillOver = (from: number, to: number): readonly [number, number] => {
    const rival = isKnown ? strongestSimple(hindcast, i, from, to) : -1;
    if (rival === -1) return [Number.NaN, -1];
    const theirs = meanOf(hindcast.rivalMse, rival * cells + i * H + from, rival * cells + i * H + to);
    return [skillScore(meanOf(hindcast.mse, i * H + from, i * H + to), theirs), rival];
  };
  const [skill, rival] = skillOver(0, H);
  const verdict = {
    signal: hindcast.signals[i],
    bestRival: rival === -1 ? 'none' : hindcast.rivals[rival],
    skill,
    skillAt: horizons.map((h) => skillOver(h - 1, h)[0]),
    coverage: meanOf(hindcast.coverage, i * H, (i + 1) * H),
    test:
      rival === -1
        ? null
        : compareLosses(
            hindcast.pathLoss[i],
            hindcast.rivalPathLoss[rival * hindcast.signals.length + i],
            Math.ceil(H / hindcast.lossEvery),
          ),
    blocks: rival === -1 ? [] : skillByBlock(hindcast, i, rival),
  };
  const isPerfect = rival !== -1 && meanOf(hindcast.rivalMse, rival * cells + i * H, rival * cells + (i + 1) * H) === 0;
  return { ...verdict, sentence: signalSentence(verdict, isPerfect, H, hindcast.nominalCoverage) };
}

function signalSentence(
  verdict: Omit<Verdict, 'sentence'>,
  isRivalPerfect: boolean,
  horizon: number,
  nominal: number,
): string {
  const { signal, skill, bestRival, coverage } = verdict;
  if (Number.isNaN(skill)) return `${signal}: too few readings in the judged part, so nothing is known of its skill.`;
  const over = horizon === 1 ? 'one step ahead' : `over ${horizon} steps`;
  const bounds = `${percent(coverage)} inside the ${percent(nominal)} bounds`;
  if (isRivalPerfect) return `${signal}: no better than ${bestRival}, which made no error ${over}; ${bounds}.`;
  if (skill >= LEAST_SKILL) {
    const sure = surety(verdict);
    return `${signal}: squared error ${percent(skill)} below ${bestRival} ${over}${sure && ` (${sure})`}; ${bounds}.`;
  }
  const away = `${percent(Math.min(Math.abs(skill), MOST_WORSE))} ${skill > 0 ? 'below' : 'above'}`;
  const surely = skill <= -LEAST_SKILL && verdict.test !== null && verdict.test.pWorse <= SURE ? ', surely' : '';
  return `${signal}: no better than ${bestRival} ${over} (squared error ${away}${surely}); ${bounds}.`;
}

/** Whether a gain may be chance, and in how many stretches of time it shows; '' where nothing can be said. */
function surety({ test, blocks }: Pick<Verdict, 'test' | 'blocks'>): string {
  const known = blocks.filter((block) => !Number.isNaN(block.skill));
  const won = known.filter((block) => block.skill > 0).length;
  const stretches = known.length > 1 ? [`better in ${won} of ${known.length} stretches`] : [];
  if (test === null) return stretches.join('');
  return [test.pBetter <= SURE ? 'sure' : 'may be chance', ...stretches].join('; ');
}

function wholeSentence(verdicts: readonly Verdict[], better: number, meanSkill: number, hasSkill: boolean): string {
  const signals = verdicts.length;
  const of = `${better} of ${signals} ${signals === 1 ? 'signal' : 'signals'}`;
  if (hasSkill) {
    return `Beats the best obvious guess on ${of}; on average the mean squared error is ${percent(meanSkill)} lower.${worseText(verdicts)}`;
  }
  return `Shows no skill over the best obvious guess (better on ${of}, mean skill ${percent(meanSkill)}); it should not be sealed.`;
}

/** Signals on which the guess is better, by name. */
function worseText(verdicts: readonly Verdict[]): string {
  const worse = verdicts.filter(({ skill }) => skill <= -LEAST_SKILL).map(({ signal }) => signal);
  if (worse.length === 0) return '';
  const more = worse.length > MOST_NAMED ? ` and ${worse.length - MOST_NAMED} more` : '';
  return ` The guess is better for ${worse.slice(0, MOST_NAMED).join(', ')}${more}.`;
}

function percent(share: number): string {
  if (!Number.isFinite(share)) return 'an unknown share';
  const value = 100 * share;
  return `${Math.abs(value) < 10 ? value.toFixed(1) : value.toFixed(0)} %`;
}
