/** The warnings of one signal: which of its limits' warnings are open, and what is still to be said of those that ended. */
import { type LimitName, type LimitWarning, type Site, warnRuleOf } from '@stillwell/protocol';
import { LIMITS, type Outlook, shownProbability } from './outlooks.ts';
import type { KeptWarning } from './warnings-memory.ts';
import { followed, type OpenWarning, opened, opens, renewTicks, tell } from './warnings-track.ts';

/** How far a tick's forecast of a signal may be believed; `reason` where nothing can be said. */
export type Trust = { readonly kind: 'good' | 'blind' } | { readonly kind: 'none'; readonly reason: string };

/** A warning, and whether subscribers have had its first word. */
interface Open {
  readonly warning: OpenWarning;
  isAnnounced: boolean;
}

/** See the file head. */
export class SignalWarnings {
  /** Whether there is something to say. */
  isDue = false;
  /** Whether what is kept on disk is no longer true. */
  hasChanged = false;
  readonly #site: Site;
  readonly #signal: number;
  readonly #open = new Map<LimitName, Open>();
  readonly #endings = new Map<LimitName, LimitWarning>();

  /** signal  counted from the first of the site */
  constructor(site: Site, signal: number) {
    this.#site = site;
    this.#signal = signal;
  }

  get openCount(): number {
    return this.#open.size;
  }

  /** Takes back what an earlier life of the gateway left. */
  restore(kept: KeptWarning): void {
    const found = LIMITS.find(([name]) => name === kept.limit);
    if (found === undefined) return;
    const [limit, key, side] = found;
    const { sinceTick, seenTick, crossedTick, probability, ending, value } = kept;
    const sight = { probability, earliest: null, likely: null, latest: null, isPast: false };
    const warning: OpenWarning = { sinceTick, seenTick, sight, crossedTick, lowSince: null, told: null };
    this.isDue = true;
    if (ending !== null) this.#end(limit, side, value, warning, ending.status, ending.reason);
    else if (this.#site.signals[this.#signal]!.limits[key] !== value)
      this.#end(limit, side, value, warning, 'expired', 'the limit has changed in the site file');
    else this.#open.set(limit, { warning, isAnnounced: true });
  }

  /** Takes a tick in, and returns how many warnings it opened. */
  look(tick: number, outlooks: readonly Outlook[], reading: number, trust: Trust): number {
    if (trust.kind === 'none') {
      this.expire(trust.reason);
      return 0;
    }
    let count = 0;
    for (const outlook of outlooks) {
      const { limit, key, side, value } = outlook;
      const isPast = side === 'above' ? reading > value : reading < value;
      const { probability, earliest, likely, latest } = outlook;
      // Of a limit that is passed already there is no time to come.
      const sight = isPast
        ? { probability, earliest: null, likely: null, latest: null, isPast }
        : { probability, earliest, likely, latest, isPast };
      const rule = warnRuleOf(this.#site, this.#signal, key);
      this.#expireOld(limit, side, value, tick);
      const open = this.#open.get(limit);
      if (open !== undefined) {
        const { crossedTick } = open.warning;
        const event = followed(open.warning, rule, this.#site.horizon, tick, sight);
        if (event === 'closed') this.#end(limit, side, value, open.warning, 'closed', null);
        if (event !== null) this.isDue = true;
        if (crossedTick !== open.warning.crossedTick) this.hasChanged = true;
      } else if (trust.kind === 'good' && opens(rule, sight)) {
        this.#open.set(limit, { warning: opened(tick, sight), isAnnounced: false });
        this.isDue = true;
        this.hasChanged = true;
        count++;
      }
    }
    return count;
  }

  /** Ends all that is open, since nothing can be said any more. */
  expire(reason: string): void {
    for (const [name, , side] of LIMITS) {
      const open = this.#open.get(name);
      if (open !== undefined) this.#end(name, side, this.#valueOf(name), open.warning, 'expired', reason);
    }
  }

  /** All that is to be said now: what is open and, of the same limit only where nothing is, what has ended. */
  words(): LimitWarning[] {
    return LIMITS.flatMap(([limit, , side]) => {
      const open = this.#open.get(limit);
      const ending = this.#endings.get(limit);
      if (open === undefined) return ending === undefined ? [] : [ending];
      const { warning, isAnnounced } = open;
      return [this.#word(limit, side, this.#valueOf(limit), warning, isAnnounced ? 'updated' : 'opened', null)];
    });
  }

  /** Called when words leave; they count as told unless `failed` follows. */
  sent(): void {
    this.isDue = false;
    for (const { warning } of this.#open.values()) tell(warning);
  }

  /** The broker has them. */
  arrived(words: readonly LimitWarning[]): void {
    for (const word of words) {
      const open = this.#open.get(word.limit);
      if (open !== undefined && this.#msOf(open.warning.sinceTick) === word.sinceMs) open.isAnnounced = true;
      const ending = this.#endings.get(word.limit);
      if (ending === undefined) continue;
      // A newer opening was said in its place.
      if (ending === word || word.sinceMs > ending.sinceMs) {
        this.#endings.delete(word.limit);
        this.hasChanged = true;
      }
    }
  }

  /** The broker may not have them: to be said again. */
  failed(): void {
    this.isDue = true;
  }

  /** As they are kept on disk. */
  toKeep(): KeptWarning[] {
    const signal = this.#site.signals[this.#signal]!.name;
    const { tickMs } = this.#site;
    const open = [...this.#open].map(([limit, { warning }]): KeptWarning => {
      const { sinceTick, seenTick, crossedTick, sight } = warning;
      const value = this.#valueOf(limit);
      const { probability } = sight;
      return { signal, limit, value, sinceTick, seenTick, crossedTick, probability, ending: null };
    });
    const ended = [...this.#endings.values()].flatMap((word): KeptWarning[] => {
      const { limit, value, sinceMs, crossedMs, probability, status, reason } = word;
      if (this.#open.has(limit) || (status !== 'closed' && status !== 'expired')) return [];
      const sinceTick = sinceMs / tickMs;
      const crossedTick = crossedMs === null ? null : crossedMs / tickMs;
      return [
        { signal, limit, value, sinceTick, seenTick: sinceTick, crossedTick, probability, ending: { status, reason } },
      ];
    });
    return [...open, ...ended];
  }

  /** What was open before more ticks than a forecast reaches is another story than what opens now. */
  #expireOld(limit: LimitName, side: 'above' | 'below', value: number, tick: number): void {
    const open = this.#open.get(limit);
    if (open === undefined) return;
    const { horizon } = this.#site;
    const away = tick - open.warning.seenTick;
    if (away >= 0 && away <= horizon + renewTicks(horizon)) return;
    const reason = away < 0 ? 'the clock was set back' : `nothing was forecast for ${away} ticks`;
    this.#end(limit, side, value, open.warning, 'expired', reason);
  }

  #end(
    limit: LimitName,
    side: 'above' | 'below',
    value: number,
    warning: OpenWarning,
    status: 'closed' | 'expired',
    reason: string | null,
  ): void {
    const open = this.#open.get(limit);
    this.#open.delete(limit);
    this.hasChanged = true;
    // Of what nobody has heard of, nobody need hear the end.
    if (open !== undefined && !open.isAnnounced && warning.told === null) return;
    this.#endings.set(limit, this.#word(limit, side, value, warning, status, reason));
    this.isDue = true;
  }

  #word(
    limit: LimitName,
    side: 'above' | 'below',
    value: number,
    { sinceTick, seenTick, sight, crossedTick }: OpenWarning,
    status: LimitWarning['status'],
    reason: string | null,
  ): LimitWarning {
    const timeOf = (step: number | null): number | null =>
      step === null || status === 'expired' ? null : this.#msOf(seenTick + step);
    return {
      limit,
      side,
      value,
      status,
      sinceMs: this.#msOf(sinceTick),
      probability: shownProbability(sight.probability),
      earliestMs: timeOf(sight.earliest),
      likelyMs: timeOf(sight.likely),
      latestMs: timeOf(sight.latest),
      crossedMs: crossedTick === null ? null : this.#msOf(crossedTick),
      reason,
    };
  }

  #msOf(tick: number): number {
    return tick * this.#site.tickMs;
  }

  #valueOf(limit: LimitName): number {
    const [, key] = LIMITS.find(([name]) => name === limit)!;
    return this.#site.signals[this.#signal]!.limits[key]!;
  }
}
