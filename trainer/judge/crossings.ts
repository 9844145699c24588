/**
 * What was said of limits at many origins, beside what came: whether the signal passed the limit within the horizon, and
 * when. Asked only where the signal stands on the near side of the limit and nearly all of what came is known.
 */
import type { Limits } from '@stillwell/protocol';
import { crossing, FOLDED, type Model } from '@stillwell/runtime/filter';
import { quantiles } from '../history/order-statistics.ts';
import type { Series } from '../history/series.ts';
import type { TickSpan } from '../span.ts';
import type { Moment } from './replay.ts';

/** A limit that is asked about, in the signal's unit. */
export interface AskedLimit {
  readonly signal: number;
  readonly value: number;
  readonly side: 'above' | 'below';
}

/** One question and its answer; steps are null where the limit was not, or was not said to be, passed. */
export interface CrossingPair {
  readonly said: number;
  readonly cameTrue: boolean;
  readonly saidStep: number | null;
  readonly cameStep: number | null;
}

/** Of the readings ahead, at least this share must be there for "it did not cross" to be known. */
const LEAST_KNOWN = 0.9;
/** Shares of the readings that limits are put at where the site declares none. */
const LIMIT_SHARES = [0.05, 0.2, 0.8, 0.95] as const;

/** Origins asked at, and questions asked in all, about, at most. */
const MOST_ORIGINS = 800;
const MOST_QUESTIONS = 40_000;

/** Every how many-th origin is asked at, so that many signals or a long time take no longer than they tell. */
export function askEvery(origins: number, limits: number): number {
  return Math.max(1, Math.floor(origins / Math.min(MOST_ORIGINS, Math.ceil(MOST_QUESTIONS / Math.max(1, limits)))));
}

/** The limits a site file declares, by signal. */
export function declaredLimits(limits: readonly Limits[]): AskedLimit[] {
  return limits.flatMap(({ highHigh, high, low, lowLow }, signal) => [
    ...[highHigh, high].flatMap((value): AskedLimit[] => (value === null ? [] : [{ signal, value, side: 'above' }])),
    ...[low, lowLow].flatMap((value): AskedLimit[] => (value === null ? [] : [{ signal, value, side: 'below' }])),
  ]);
}

/**
 * Limits where a signal often goes: quantiles of its readings in a part of the series, low ones asked below, high ones
 * above; none for a signal that keeps one value, none at a value that no reading lies beyond, as the 0 A of a pump at rest.
 *
 * shapes  span of indices into the series
 * units   the signals'
 * throws  nothing
 * source  own choice
 * cost    O(ny T)
 */
export function usualLimits(series: Series, span: TickSpan): AskedLimit[] {
  return series.values.slice(0, series.signalCount).flatMap((y, signal) => {
    const part = y.slice(span.fromTick, span.toTick);
    const found = quantiles(part, LIMIT_SHARES);
    const middle = (found[1] + found[2]) / 2;
    return found.flatMap((value): AskedLimit[] => {
      if (!(value !== middle)) return [];
      const side = value > middle ? 'above' : 'below';
      return part.some((reading) => isPast(reading, value, side)) ? [{ signal, value, side }] : [];
    });
  });
}

/** Readings as the filter takes them; NaN stays NaN. In a loop, since what a callback returns is put on the heap, one by one. */
export function clipped(y: Float64Array, low: number, high: number): Float64Array {
  const out = new Float64Array(y.length);
  for (let t = 0; t < y.length; t++) out[t] = Math.min(high, Math.max(low, y[t]));
  return out;
}

/** Gathers pairs as a replay goes along. */
export class Crossings {
  readonly pairs: CrossingPair[] = [];
  readonly #model: Model;
  readonly #limits: readonly AskedLimit[];
  readonly #readings: readonly Float64Array[];
  readonly #end: number;

  /** readings (ny) of (ticks), clipped; nothing from index `end` on is looked at. */
  constructor(model: Model, limits: readonly AskedLimit[], readings: readonly Float64Array[], end: number) {
    this.#model = model;
    this.#limits = limits;
    this.#readings = readings;
    this.#end = end;
  }

  /** Asks about every limit at one origin. */
  visit({ at, state, median, bounds }: Moment): void {
    if (at + this.#model.horizon >= this.#end) return;
    for (const { signal, value, side } of this.#limits) {
      const now = this.#readings[signal][at];
      if (state.observed[signal] !== FOLDED || Number.isNaN(now) || isPast(now, value, side)) continue;
      const cameStep = this.#firstPast(signal, at, value, side);
      if (cameStep === undefined) continue;
      const { probability, step } = crossing(this.#model, bounds, state, median, signal, value, side);
      this.pairs.push({ said: probability, cameTrue: cameStep !== null, saidStep: step, cameStep });
    }
  }

  /** Step of the first reading past the limit; null: there is none; undefined: too little is known. */
  #firstPast(signal: number, at: number, value: number, side: 'above' | 'below'): number | null | undefined {
    const y = this.#readings[signal];
    const H = this.#model.horizon;
    let known = 0;
    for (let h = 1; h <= H; h++) {
      if (Number.isNaN(y[at + h])) continue;
      if (isPast(y[at + h], value, side)) return h;
      known++;
    }
    return known >= LEAST_KNOWN * H ? null : undefined;
  }
}

function isPast(reading: number, limit: number, side: 'above' | 'below'): boolean {
  return side === 'above' ? reading > limit : reading < limit;
}
