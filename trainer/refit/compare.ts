/**
 * A new model beside the one it would replace, on the same readings that neither should have learned from. The new one is
 * scored as judged, before it learned once more from everything.
 */
import type { OpenDocument } from '../bundle-file.ts';
import type { Series } from '../history/series.ts';
import { hindcast } from '../judge/hindcast.ts';
import { meanOf } from '../judge/scores.ts';
import { learnedSpans } from '../learned-spans.ts';
import type { FitResult } from '../pipeline.ts';
import type { JudgingBeside } from '../threads/judging-beside.ts';
import type { Cast } from '../threads/requests.ts';

/** Ratios of mean squared error, new over previous; below 1 the new one is better. */
export interface Comparison {
  readonly fromMs: number;
  readonly toMs: number;
  readonly origins: number;
  /** Mean over signals of their ratios (geometric), every step. */
  readonly ratio: number;
  readonly signals: readonly {
    readonly signal: string;
    readonly ratio: number;
    readonly coverage: number;
    readonly previousCoverage: number;
  }[];
  /** Share of the judged time that the previous bundle had already learned or been calibrated from: it flatters that one. */
  readonly seenByPrevious: number;
  readonly isRecommended: boolean;
  readonly sentence: string;
}

/** Within so much of each other two models count as equal, and the serving one stays. */
const EQUAL_BAND = 0.01;
/** A signal that gets worse by more than this is named, and the change not recommended. */
const MUCH_WORSE = 1.1;

/**
 * Scores both on the judged span of the new fit; the previous one on the thread `beside`, where there is one.
 *
 * shapes  the previous bundle has the same channels as the series
 */
export async function compare(
  result: FitResult,
  previous: OpenDocument,
  series: Series,
  beside: JudgingBeside | null = null,
): Promise<Comparison> {
  const units = previous.bundle.channels.map((channel) => channel.unit);
  const span = { ...result.judged, learn: null, clipAs: result.model };
  const old = await (beside?.cast(previous.model, series, span, units) ??
    hindcast(previous.model, series, span, units));
  const fresh = result.hindcast;
  const signals = fresh.signals.map((signal, i) => ({
    signal,
    ratio: ratioOf(fresh, old, i),
    coverage: meanCoverage(fresh, i),
    previousCoverage: meanCoverage(old, i),
  }));
  const { ratio, isNoneMuchWorse } = overall(signals.map((one) => one.ratio));
  const seenByPrevious = shareSeen(result, previous);
  const isRecommended = ratio < 1 - EQUAL_BAND && isNoneMuchWorse && result.verdicts.hasSkill;
  const facts = { ratio, signals, seenByPrevious, isRecommended };
  return {
    fromMs: fresh.fromMs,
    toMs: fresh.toMs,
    origins: fresh.origins,
    ...facts,
    sentence: sentenceOf(facts, result.verdicts.hasSkill),
  };
}

/**
 * Geometric mean of the signals' ratios, and whether none is much worse. A signal that the previous model forecast without
 * any error has an infinite ratio: it cannot stand in a mean, but it is the worst there is. NaN (nothing to judge) says nothing.
 */
export function overall(ratios: readonly number[]): { readonly ratio: number; readonly isNoneMuchWorse: boolean } {
  const known = ratios.filter((ratio) => Number.isFinite(ratio) && ratio > 0);
  return {
    ratio: Math.exp(meanOf(Float64Array.from(known, Math.log))),
    isNoneMuchWorse: !ratios.some((ratio) => ratio >= MUCH_WORSE),
  };
}

/** Both horizons may differ; the steps that both forecast are compared. */
function ratioOf(fresh: Cast, old: Cast, signal: number): number {
  const steps = Math.min(fresh.horizon, old.horizon);
  const mean = (cast: Cast): number => meanOf(cast.mse.subarray(signal * cast.horizon, signal * cast.horizon + steps));
  return mean(fresh) / mean(old);
}

function meanCoverage(cast: Cast, signal: number): number {
  return meanOf(cast.coverage.subarray(signal * cast.horizon, (signal + 1) * cast.horizon));
}

function shareSeen(result: FitResult, previous: OpenDocument): number {
  const { fromTick, toTick } = result.judged;
  const { seenTo } = learnedSpans(previous.bundle);
  return Math.max(0, Math.min(1, (seenTo - fromTick) / (toTick - fromTick)));
}

function sentenceOf(
  facts: Pick<Comparison, 'ratio' | 'signals' | 'seenByPrevious' | 'isRecommended'>,
  hasSkill: boolean,
): string {
  const change = `${Math.abs((1 - facts.ratio) * 100).toFixed(1)} % ${facts.ratio < 1 ? 'below' : 'above'}`;
  const seen =
    facts.seenByPrevious > 0
      ? ` The previous bundle had seen ${Math.round(facts.seenByPrevious * 100)} % of that time before, which flatters it.`
      : '';
  const told = `On the judged time the new model's mean squared error is ${change} that of the previous bundle.${seen}`;
  if (facts.isRecommended) return `${told} Recommended: seal it and roll it out.`;
  const worse = facts.signals.filter((one) => one.ratio >= MUCH_WORSE).map((one) => one.signal);
  const why = !hasSkill
    ? 'it shows no skill over the obvious guesses'
    : worse.length > 0
      ? `it forecasts ${worse.join(', ')} worse`
      : 'the gain is too small to change a working bundle for';
  return `${told} Not recommended: ${why}.`;
}
