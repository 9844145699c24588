/** Part of a series. */
import type { Series } from './series.ts';
import { digestOf } from './ticks.ts';

/**
 * Ticks from <= n < to of a series, its own digest with it. Values are shared, never write to them.
 *
 * shapes  from and to are indices into the series
 */
export function sliceSeries(series: Series, from: number, to: number): Series {
  const { tickMs, excluded } = series;
  const values = series.values.map((y) => y.subarray(from, to));
  const firstTick = series.firstTick + from;
  return Object.freeze({
    ...series,
    firstTick,
    ticks: to - from,
    values,
    digest: digestOf(tickMs, firstTick, values),
    ...(excluded === undefined
      ? {}
      : { excluded: { ...excluded, isExcluded: excluded.isExcluded.subarray(from, to) } }),
  });
}
