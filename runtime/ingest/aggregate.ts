/** One value of the readings that fell into a tick. Order of arrival does not matter: readings are sorted by time first. */
import { type Aggregate, counterIncrease } from '@stillwell/protocol';

/** Readings of one channel in one tick, in order of arrival; `times` ms since 1970. */
export interface TickReadings {
  readonly times: number[];
  readonly values: number[];
}

/**
 * The tick's value.
 *
 * counterBefore  for 'increment': the counter at its last reading before the tick, NaN where unknown
 * wrap           for 'increment': where the counter begins again, null where it is not known
 * returns        NaN without readings, and for the first increment
 */
export function aggregateTick(
  how: Aggregate,
  readings: TickReadings,
  counterBefore: number,
  wrap: number | null = null,
): number {
  const values = inOrder(readings);
  if (values.length === 0) return Number.NaN;
  switch (how) {
    case 'last':
      return values[values.length - 1]!;
    case 'min':
      return Math.min(...values);
    case 'max':
      return Math.max(...values);
    case 'sum':
      return values.reduce((sum, value) => sum + value, 0);
    case 'mean':
      return values.reduce((sum, value) => sum + value, 0) / values.length;
    case 'increment':
      return increments(values, counterBefore, wrap);
  }
}

/** Value of the latest reading, NaN where there is none: what the next tick's increment counts from. */
export function latestValue(readings: TickReadings): number {
  const values = inOrder(readings);
  return values.length === 0 ? Number.NaN : values[values.length - 1]!;
}

function increments(values: readonly number[], counterBefore: number, wrap: number | null): number {
  let sum = 0;
  let before = counterBefore;
  let known = false;
  for (const value of values) {
    const increase = counterIncrease(before, value, wrap);
    if (!Number.isNaN(increase)) {
      sum += increase;
      known = true;
    }
    before = value;
  }
  return known ? sum : Number.NaN;
}

/** Values by time; the later arrival wins last place among equal times. */
function inOrder(readings: TickReadings): readonly number[] {
  const { times, values } = readings;
  let isSorted = true;
  for (let i = 1; i < times.length && isSorted; i++) isSorted = times[i]! >= times[i - 1]!;
  if (isSorted) return values;
  const order = times.map((_, i) => i).sort((a, b) => times[a]! - times[b]! || a - b);
  return order.map((i) => values[i]!);
}
