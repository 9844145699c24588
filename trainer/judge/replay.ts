/**
 * Runs the gateway's own filter over a history, tick by tick: what is judged is exactly what the gateway computes, its
 * rounding, clips, guards and tracked bounds included.
 */
import {
  type Bounds,
  createBounds,
  createState,
  type FilterState,
  forecastPath,
  intervalOf,
  type LinearModel,
  trackBounds,
  update,
} from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import { type Bank, settlingTicks } from '../identify/bank.ts';
import type { TickSpan } from '../span.ts';

/** What the filter has to say after a tick; the arrays are overwritten at the next. */
export interface Moment {
  /** Index into the series. */
  readonly at: number;
  readonly state: FilterState;
  /** (ny × H) in the signals' units */
  readonly median: Float64Array;
  readonly lower: Float64Array;
  readonly upper: Float64Array;
}

/**
 * Replays.
 *
 * shapes  span of indices into the series whose ticks are visited; the filter and its bounds are warmed up on the
 *         ticks before it until the start no longer shows, as far as the series goes back
 * units   the signals'
 * throws  FilterError if the model does not fit the series
 */
export function replay(model: LinearModel, series: Series, span: TickSpan, visit: (moment: Moment) => void): void {
  const state = createState(model);
  const bounds: Bounds = createBounds(model);
  const cells = model.signalCount * model.horizon;
  const median = new Float64Array(cells);
  const lower = new Float64Array(cells);
  const upper = new Float64Array(cells);
  const readings = new Float64Array(model.channelCount);
  const warm = Math.max(model.warmupTicks, settlingTicks(bankOf(model)));
  for (let at = Math.max(0, span.fromTick - warm); at < span.toTick; at++) {
    for (let c = 0; c < readings.length; c++) readings[c] = series.values[c][at];
    update(model, state, series.firstTick + at, readings);
    forecastPath(model, state, median);
    trackBounds(model, bounds, state, median);
    if (at < span.fromTick) continue;
    intervalOf(model, bounds, state, median, lower, upper);
    visit({ at, state, median, lower, upper });
  }
}

function bankOf(model: LinearModel): Bank {
  return {
    decays: Array.from(model.decays),
    resonators: Array.from(model.resonatorRe, (re, k) => [re, model.resonatorIm[k]] as const),
    lags: Array.from(model.lags),
  };
}
