/**
 * Which values a signal took, and how often: one sort a signal, shared by the figures and the search for stuck sensors.
 */
import { present } from './order-statistics.ts';

/** What one signal’s values were. */
export interface ValuesSeen {
  readonly readings: number;
  readonly distinct: number;
  readonly least: number | null;
  readonly median: number | null;
  readonly greatest: number | null;
  /** The commonest value, NaN where there is none, and its share of the readings. */
  readonly commonest: number;
  readonly commonestShare: number;
  /** Values that make up at least `RESTING` of the readings each. */
  readonly resting: readonly { readonly value: number; readonly count: number }[];
}

/** A value a signal rests at (a pump that is off, rain that does not fall) is not a fault however long it lasts. */
const RESTING = 0.2;

/** Counts the values of one signal; NaN is passed over. */
export function seeValues(values: Float64Array): ValuesSeen {
  const sorted = present(values).sort();
  const resting: { value: number; count: number }[] = [];
  let distinct = 0;
  let commonest = Number.NaN;
  let most = 0;
  for (let at = 0; at < sorted.length; ) {
    const value = sorted[at] as number;
    let end = at + 1;
    while (end < sorted.length && sorted[end] === value) end++;
    distinct++;
    if (end - at > most) {
      most = end - at;
      commonest = value;
    }
    if (end - at >= RESTING * sorted.length) resting.push({ value, count: end - at });
    at = end;
  }
  return {
    readings: sorted.length,
    distinct,
    least: sorted[0] ?? null,
    median: sorted[sorted.length >> 1] ?? null,
    greatest: sorted.at(-1) ?? null,
    commonest,
    commonestShare: sorted.length === 0 ? Number.NaN : most / sorted.length,
    resting,
  };
}
