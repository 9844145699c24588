/** Readings of the last few horizons as the page draws them: all of them, or of so many to a point the one that stands out. */
import type { RecentTicks } from '../ingest/recent.ts';
import type { PastReadings } from './told.ts';

/** Most points of a channel. */
const MOST_POINTS = 480;

/**
 * Readings of the last `count` ticks that are known.
 *
 * decimals  (nc) that are kept; null: all
 */
export function pastReadings(
  recent: RecentTicks,
  count: number,
  channels: number,
  decimals: readonly (number | null)[],
): PastReadings {
  const end = recent.firstTick + recent.count;
  const stride = Math.max(1, Math.ceil(Math.min(count, recent.count) / MOST_POINTS));
  // Buckets begin at multiples of the stride, so that points stay where they are when the page is loaded again.
  const first = Math.max(recent.firstTick, Math.ceil((end - count) / stride) * stride);
  const ticks: number[] = [];
  for (let tick = first; tick < end; tick += stride) ticks.push(Math.min(end - 1, tick + ((stride - 1) >> 1)));
  const values = Array.from({ length: channels }, (_, c) => {
    let before = Number.NaN;
    return ticks.map((_, k) => {
      const from = first + k * stride;
      const value = standing(recent, c, from, Math.min(end, from + stride), before);
      if (Number.isNaN(value)) return null;
      before = value;
      return roundTo(value, decimals[c] ?? null);
    });
  });
  return { ticks, values };
}

/** The value of a bucket that lies furthest from what was drawn before: a spike must not fall between two points. */
function standing(recent: RecentTicks, channel: number, from: number, to: number, before: number): number {
  let chosen = Number.NaN;
  for (let tick = from; tick < to; tick++) {
    const value = recent.at(tick, channel);
    if (Number.isNaN(value)) continue;
    if (Number.isNaN(chosen) || Math.abs(value - before) > Math.abs(chosen - before)) chosen = value;
  }
  return chosen;
}

/** To so many decimals: means of a tick have many more than anyone sees. */
export function roundTo(value: number, decimals: number | null): number {
  if (decimals === null) return Number(value.toPrecision(7));
  const factor = 10 ** (decimals + 1);
  const rounded = Math.round(value * factor) / factor;
  return Number.isFinite(rounded) ? rounded : value;
}
