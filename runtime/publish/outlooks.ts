/** What a tick's forecast says of a signal's limits; asked once, for the forecast message and for warnings. */
import type { LimitName, Limits } from '@stillwell/protocol';
import { type Crossing, crossing } from '@stillwell/runtime/filter';
import type { Serving } from '../serving.ts';

/** Every limit there may be: its name in messages and in the site, and which side of it is meant. */
export const LIMITS: readonly (readonly [LimitName, keyof Limits, 'above' | 'below'])[] = [
  ['high_high', 'highHigh', 'above'],
  ['high', 'high', 'above'],
  ['low', 'low', 'below'],
  ['low_low', 'lowLow', 'below'],
];

/** One limit's outlook. */
export interface Outlook extends Crossing {
  readonly limit: LimitName;
  readonly key: keyof Limits;
  readonly side: 'above' | 'below';
  readonly value: number;
}

/** Outlooks of the limits a signal has, in the order of LIMITS, on the path as it was forecast last. */
export function outlooksOf(serving: Serving, median: Float64Array, signal: number, limits: Limits): Outlook[] {
  const { model, bounds, state } = serving;
  return LIMITS.flatMap(([limit, key, side]) => {
    const value = limits[key];
    if (value === null) return [];
    return [{ limit, key, side, value, ...crossing(model, bounds, state, median, signal, value, side) }];
  });
}

/** A probability as messages have it. */
export function shownProbability(probability: number): number {
  return Math.round(probability * 1000) / 1000;
}
