/** What has been heard, put together: the past of every channel, the forecasts of now, the gateway's word on itself. */
import type { GatewayFacts, News, Pulse, SaidThen, SiteFacts, Snapshot } from '../told.ts';

/** A path as messages and earlier forecasts have it: at each step median and bounds. */
export interface PathPoint {
  readonly tick: number;
  readonly median: number;
  readonly lower: number;
  readonly upper: number;
}

/** Horizons of the past that are kept and drawn. */
export const PAST_HORIZONS = 3;

type Health = Pulse['health'];
type Forecast = News['forecasts'][number];

/** See the file head; empty before the first snapshot. */
export class Plant {
  readonly site: SiteFacts;
  health: Health;
  facts: GatewayFacts;
  said: readonly SaidThen[];
  readonly #ticks: number[] = [];
  readonly #values: (number | null)[][];
  #forecasts = new Map<string, Forecast>();
  #newest = Number.NEGATIVE_INFINITY;
  #at: number | null;
  #heardMs: number;

  /** heardMs  of a clock that never steps back */
  constructor(snapshot: Snapshot, heardMs: number) {
    this.site = snapshot.site;
    this.health = snapshot.health;
    this.facts = snapshot.facts;
    this.said = snapshot.said;
    this.#at = snapshot.at;
    this.#heardMs = heardMs;
    this.#values = [...this.site.signals, ...this.site.inputs].map(() => []);
    this.news(snapshot, heardMs);
  }

  pulse({ at, health, facts }: Pulse, heardMs: number): void {
    this.#at = at;
    this.#heardMs = heardMs;
    this.health = health;
    this.facts = facts;
  }

  news(news: News, heardMs: number): void {
    this.pulse(news, heardMs);
    this.said = news.said;
    this.#forecasts = new Map(news.forecasts.map((one) => [one.signal, one]));
    this.#append(news.came);
    const origins = news.forecasts.map((one) => Date.parse(one.origin) / this.site.tick_ms);
    this.#newest = Math.max(this.#ticks.at(-1) ?? Number.NEGATIVE_INFINITY, ...origins);
    this.#forget();
  }

  /** Ticks of the readings kept, rising. */
  get ticks(): readonly number[] {
    return this.#ticks;
  }

  /** The newest closed tick; -Infinity before the first. */
  get newest(): number {
    return this.#newest;
  }

  values(channel: number): readonly (number | null)[] {
    return this.#values[channel]!;
  }

  /** The newest reading of a channel that a tick has; null: none is known. */
  latest(channel: number): number | null {
    return this.values(channel).findLast((value) => value !== null) ?? null;
  }

  forecast(signal: number): Forecast | null {
    return this.#forecasts.get(this.site.signals[signal]!.name) ?? null;
  }

  /** Now, by the clock that ticks go by; it runs on between words only where that is the wall's. Null: not known. */
  now(monotonicMs: number): number | null {
    if (this.#at === null) return null;
    return this.site.clock === 'wall' && this.facts.clock_set ? this.#at + monotonicMs - this.#heardMs : this.#at;
  }

  /** Seconds since the last word. */
  silence(monotonicMs: number): number {
    return (monotonicMs - this.#heardMs) / 1000;
  }

  /** The present forecast as points. */
  ahead(signal: number): PathPoint[] {
    const forecast = this.forecast(signal);
    if (forecast === null) return [];
    const origin = Date.parse(forecast.origin) / this.site.tick_ms;
    return forecast.median.map((median, h) => ({
      tick: origin + h + 1,
      median,
      lower: forecast.lower[h]!,
      upper: forecast.upper[h]!,
    }));
  }

  /** Earlier forecasts of a signal, each up to where the next one began, or to the newest tick. */
  saidBefore(signal: number): PathPoint[][] {
    const { newest } = this;
    const oldest = newest - PAST_HORIZONS * this.site.horizon;
    return this.said.map(({ steps, tick, median, lower, upper }, k) => {
      const end = Math.min(newest, this.said[k + 1]?.tick ?? Number.POSITIVE_INFINITY);
      return steps.flatMap((step, s): PathPoint[] =>
        tick + step > end || tick + step < oldest || median[signal] === undefined
          ? []
          : [{ tick: tick + step, median: median[signal][s]!, lower: lower[signal]![s]!, upper: upper[signal]![s]! }],
      );
    });
  }

  /** Of the readings with a forecast made before them, how many lay inside its bounds. */
  kept(signal: number): { readonly inside: number; readonly of: number } {
    const values = this.values(signal);
    const byTick = new Map(this.#ticks.map((tick, k) => [tick, values[k] ?? null]));
    let inside = 0;
    let of = 0;
    for (const path of this.saidBefore(signal))
      for (const { tick, lower, upper } of path) {
        const value = byTick.get(tick) ?? null;
        if (value === null) continue;
        of++;
        if (value >= lower && value <= upper) inside++;
      }
    return { inside, of };
  }

  /** Ticks told of twice count once. */
  #append({ ticks, values }: News['came']): void {
    const known = this.#ticks.at(-1) ?? Number.NEGATIVE_INFINITY;
    ticks.forEach((tick, k) => {
      if (tick <= known) return;
      this.#ticks.push(tick);
      this.#values.forEach((own, c) => {
        own.push(values[c]?.[k] ?? null);
      });
    });
  }

  /** What is older than the chart goes. */
  #forget(): void {
    const oldest = this.#newest - PAST_HORIZONS * this.site.horizon;
    const old = this.#ticks.findIndex((tick) => tick >= oldest);
    if (old <= 0) return;
    this.#ticks.splice(0, old);
    for (const own of this.#values) own.splice(0, old);
  }
}
