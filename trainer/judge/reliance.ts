/**
 * Which readings the forecasts live on: one channel after another is taken away from the filter, as when its sensor fails,
 * and what that costs every signal's forecast is measured. Works for every kind of model, and says what a person at the
 * plant wants to know: which sensor to look after first.
 */
import type { Model } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import type { TickSpan } from '../span.ts';
import { scoreEvery } from './origin-budget.ts';
import { standingAt } from './replay.ts';
import { signalErrors } from './replay-scores.ts';

/** What losing a channel costs. */
export interface Reliance {
  /** Channels taken away, in the model's order. */
  readonly channels: readonly string[];
  /** (ny × nc) squared error without the channel over squared error with all; NaN where nothing was read. */
  readonly ratio: Float64Array;
  /** Ticks that were forecast from. */
  readonly origins: number;
}

/** Filter steps spent on it, all channels together: about a second. */
const MOST_STEPS = 12_000;
/** Fewer origins say nothing, in horizons. */
const LEAST_HORIZONS = 4;
/** With more channels than this nobody reads the table, and it would take minutes. */
const MOST_CHANNELS = 32;

/**
 * Measures it over the end of a span. The channel goes silent two horizons before the first origin that counts.
 *
 * shapes  span of indices into the series
 * units   ratios
 * throws  FilterError if the model does not fit the series
 * source  own choice; in the manner of leaving one predictor out (Breiman, Machine Learning 45, 2001, section 10)
 * cost    one warm-up, and nc + 1 replays of a few thousand ticks at most
 */
export function reliance(model: Model, series: Series, span: TickSpan): Reliance | null {
  const { channelCount: nc, signalCount: ny, horizon: H } = model;
  if (nc > MOST_CHANNELS) return null;
  const silence = 2 * Math.max(H, 8);
  const room = span.toTick - span.fromTick - silence;
  const ticks = Math.min(room, Math.max(LEAST_HORIZONS * H, Math.floor(MOST_STEPS / (nc + 1))));
  if (ticks < LEAST_HORIZONS * H) return null;
  const judged = { fromTick: span.toTick - ticks, toTick: span.toTick };
  const silentFrom = judged.fromTick - silence;
  const isLong = scoreEvery(span.toTick - span.fromTick) > 1;
  const standing = standingAt(model, series, { ...judged, fromTick: judged.fromTick - 1 }, silentFrom, isLong);
  const whole = signalErrors(model, series, judged, { standing });
  const ratio = new Float64Array(ny * nc);
  for (let c = 0; c < nc; c++) {
    const without = signalErrors(model, series, judged, { seen: silenced(series, c, silentFrom), standing });
    for (let i = 0; i < ny; i++) ratio[i * nc + c] = whole[i] > 0 ? without[i] / whole[i] : Number.NaN;
  }
  return { channels: series.names, ratio, origins: ticks - H + 1 };
}

/** The series as the filter sees it with one channel silent from an index on. */
function silenced(series: Series, channel: number, fromIndex: number): Series {
  const values = series.values.map((y, c) => (c === channel ? y.slice().fill(Number.NaN, fromIndex) : y));
  return { ...series, values };
}
