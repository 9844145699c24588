/**
 * What the bounds, the spike guard and the crossing probabilities start from: errors of the rounded model on the calibration
 * part, which it did not learn from, excluded time left out. The gateway then keeps tracking the bounds; these are only their
 * first values. A channel without one reading there starts from the spread of the learning part, one standard deviation,
 * which is all that is known of it.
 */
import { type Model, normalQuantile } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import { type Calibration, LONG_RATE } from '../quantise/float-model.ts';
import type { TickSpan } from '../span.ts';
import { conformalRadius } from './coverage.ts';
import { learnCrossing } from './crossing-table.ts';
import type { AskedLimit } from './crossings.ts';
import { settleGuard } from './guard.ts';
import { type PathMoment, replayPaths, type Standing } from './replay.ts';
import { robustScale } from './robust-scale.ts';

/** Origins used are thinned to about this many: more does not move a 90 % quantile. */
const MOST_ORIGINS = 4000;

/**
 * Calibrates. `limits` are those that the site declares, null where crossings need not be looked at; `standing` is the
 * model warmed up on what lies before the span, for the replay of errors to go on from.
 *
 * shapes  model before calibration (its guard open); span of indices into the series
 * units   standardised; limits in the signals' units
 * throws  FilterError if the model does not fit the series
 * source  robust standard deviation: Hampel, J. American Statistical Association 69 (1974); radii: split conformal
 * cost    one replay of the span, one sort a cell; a second replay where the guard passes readings over, and one for limits
 */
export function calibrate(
  model: Model,
  series: Series,
  span: TickSpan,
  coverage: number,
  limits: readonly AskedLimit[] | null = null,
  standing?: Standing,
): Calibration {
  const { signalCount: ny, channelCount: nc, horizon: H } = model;
  const ticks = span.toTick - span.fromTick;
  const every = Math.max(1, Math.ceil((ticks - H + 1) / MOST_ORIGINS));
  const sizes = Array.from({ length: ny * H }, () => new Float64Array(Math.ceil(ticks / every) + 1));
  const counts = new Int32Array(ny * H);
  const first = Array.from({ length: nc }, () => new Float64Array(ticks).fill(Number.NaN));
  // Step 2 of a path of one step stands at step 1: for telling a jump that stays from a spike that is near enough.
  const second = Array.from({ length: ny }, () => new Float64Array(ticks).fill(Number.NaN));
  const errorAt = (i: number, median: Float64Array, at: number, h: number): number => {
    const clipped = Math.min(model.clipHigh[i], Math.max(model.clipLow[i], series.values[i][at + h]));
    return (clipped - median[i * H + Math.min(h, H) - 1]) / model.scale[i];
  };
  const compare = ({ at, state, median }: PathMoment): void => {
    if (series.excluded?.isExcluded[at] === 1) return;
    const k = at - span.fromTick + 1;
    for (let c = ny; c < nc; c++)
      first[c][k] = series.values[c][at + 1] / model.scale[c] - zOf(model, c, state.value[c]);
    for (let i = 0; i < ny; i++) {
      first[i][k] = errorAt(i, median, at, 1);
      if (at + 2 < span.toTick) second[i][k] = errorAt(i, median, at, 2);
      if (k % every !== 0) continue;
      for (let h = 1; h <= H && at + h < span.toTick; h++) {
        const size = Math.abs(errorAt(i, median, at, h));
        if (!Number.isNaN(size)) sizes[i * H + h - 1][counts[i * H + h - 1]++] = size;
      }
    }
  };
  replayPaths(model, series, { fromTick: span.fromTick - 1, toTick: span.toTick - 1 }, compare, { standing });
  const residualScale = Float64Array.from(first, (errors, c) =>
    robustScale(errors.map(Math.abs), model.latticeStep[c] / model.scale[c]),
  );
  const widest = normalQuantile(0.5 + coverage / 2);
  const radius = Float64Array.from(sizes, (cell, k) => {
    if (counts[k] === 0) return widest;
    return conformalRadius(cell.subarray(0, counts[k]), coverage, ownCount(counts[k], every, (k % H) + 1));
  });
  const bounds = { residualScale, radius, boundsLongRate: LONG_RATE };
  const guard = settleGuard({ ...model, ...bounds }, series, span, first, second);
  const crossing = limits === null ? {} : learnCrossing({ ...model, ...bounds, ...guard }, series, span, limits);
  return { ...bounds, ...guard, ...crossing };
}

/** Errors at step h made less than h ticks apart tell of the same surprises. */
function ownCount(count: number, every: number, step: number): number {
  return Math.max(1, Math.min(count, (count * every) / step));
}

/** A standardised value back on the unscaled axis of `reading / scale`. */
function zOf(model: Model, channel: number, value: number): number {
  return value + model.mean[channel] / model.scale[channel];
}
