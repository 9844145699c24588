/**
 * The life of one limit's warning: opens, is said again when the news is worth it, closes. Counted in ticks, so that it is
 * the same whether every tick is looked at or, behind a backlog, only some. Pure: no clock, no messages.
 */
import type { WarnRule } from '@stillwell/protocol';

/** What a tick says of a limit: how probably it is crossed within the horizon, and in how many ticks where it is. */
export interface Sight {
  readonly probability: number;
  readonly earliest: number | null;
  readonly likely: number | null;
  readonly latest: number | null;
  /** Whether the reading of the tick lies past the limit. */
  readonly isPast: boolean;
}

/** A warning that is open. */
export interface OpenWarning {
  /** Tick whose forecast opened it. */
  readonly sinceTick: number;
  /** Tick looked at last, and what it said. */
  seenTick: number;
  sight: Sight;
  /** First reading past the limit since. */
  crossedTick: number | null;
  /** Since when the probability has stayed below closing; null: it has not. */
  lowSince: number | null;
  /** What subscribers were told last; null: nothing yet. */
  told: Told | null;
}

interface Told {
  readonly tick: number;
  readonly probability: number;
  readonly likelyTick: number | null;
  readonly isCrossed: boolean;
}

/** What a tick makes of a limit. */
export type WarningEvent = 'opened' | 'news' | 'renewed' | 'closed' | null;

/** A change of probability that is worth a message. */
const WORTH_PROBABILITY = 0.1;
/** A move of the likely time that is, as a share of the horizon. */
const WORTH_TIME_SHARE = 0.1;
/** News of one limit come no closer than this share of the horizon, but for a crossing. */
const LEAST_BETWEEN_SHARE = 0.05;
/** Said again though nothing moved after this share of the horizon … */
const RENEW_SHARE = 0.25;
/** … and this many ticks at the latest, since what a vanished gateway left must not look open for long. */
const MOST_RENEW_TICKS = 15;

/** Ticks after which an open warning is said again whatever it says. */
export function renewTicks(horizon: number): number {
  return Math.min(MOST_RENEW_TICKS, Math.max(1, Math.floor(RENEW_SHARE * horizon)));
}

/** Whether a limit without a warning gets one: probable enough, and not passed already, which needs no forecast. */
export function opens(rule: WarnRule, { probability, isPast }: Sight): boolean {
  return !isPast && rule.open < 1 && probability >= rule.open;
}

/** A warning that opens at a tick. */
export function opened(tick: number, sight: Sight): OpenWarning {
  return { sinceTick: tick, seenTick: tick, sight, crossedTick: null, lowSince: null, told: null };
}

/** Takes a tick's word on an open warning in. While the reading lies past the limit it stays open. */
export function followed(
  warning: OpenWarning,
  rule: WarnRule,
  horizon: number,
  tick: number,
  sight: Sight,
): WarningEvent {
  warning.seenTick = tick;
  warning.sight = sight;
  if (sight.isPast) warning.crossedTick ??= tick;
  if (sight.isPast || sight.probability >= rule.close) warning.lowSince = null;
  else warning.lowSince ??= tick;
  if (warning.lowSince !== null && tick - warning.lowSince + 1 >= rule.hold) return 'closed';
  const { told } = warning;
  if (told === null) return 'opened';
  if (warning.crossedTick !== null && !told.isCrossed) return 'news';
  const since = tick - told.tick;
  if (since >= renewTicks(horizon)) return 'renewed';
  return since >= LEAST_BETWEEN_SHARE * horizon && isWorthTelling(told, horizon, tick, sight) ? 'news' : null;
}

/** Notes what subscribers now know. */
export function tell(warning: OpenWarning): void {
  const { seenTick: tick, sight, crossedTick } = warning;
  const likelyTick = sight.likely === null ? null : tick + sight.likely;
  warning.told = { tick, probability: sight.probability, likelyTick, isCrossed: crossedTick !== null };
}

function isWorthTelling(told: Told, horizon: number, tick: number, { probability, likely }: Sight): boolean {
  if (Math.abs(probability - told.probability) >= WORTH_PROBABILITY) return true;
  if (likely === null || told.likelyTick === null) return (likely === null) !== (told.likelyTick === null);
  return Math.abs(tick + likely - told.likelyTick) > Math.max(1, WORTH_TIME_SHARE * horizon);
}
