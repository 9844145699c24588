/**
 * What the bounds and the spike guard start from: errors of the rounded model on the calibration part, which it did not
 * learn from, excluded time left out. The gateway then keeps tracking; these are only its first values. A channel without one reading there
 * starts from the spread of the learning part, one standard deviation, which is all that is known of it.
 */
import { type Model, normalQuantile } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import type { Calibration } from '../quantise/float-model.ts';
import type { TickSpan } from '../span.ts';
import { conformalRadius } from './coverage.ts';
import { replayPaths } from './replay.ts';
import { REJECT_MOST_TICKS, REJECT_SD, robustScale } from './robust-scale.ts';

/** Origins used are thinned to about this many: more does not move a 90 % quantile. */
const MOST_ORIGINS = 4000;
/** The guard opens to this far beyond the jumps that stayed, where a plant jumps by itself. */
const BEYOND_JUMPS = 1.2;
const JUMP_QUANTILE = 0.995;

/**
 * Calibrates.
 *
 * shapes  model before calibration (its guard open); span of indices into the series
 * units   standardised
 * throws  FilterError if the model does not fit the series
 * source  robust standard deviation: Hampel, J. American Statistical Association 69 (1974); radii: split conformal
 * cost    one replay of the span, one sort a cell
 */
export function calibrate(model: Model, series: Series, span: TickSpan, coverage: number): Calibration {
  const { signalCount: ny, channelCount: nc, horizon: H } = model;
  const ticks = span.toTick - span.fromTick;
  const every = Math.max(1, Math.ceil((ticks - H + 1) / MOST_ORIGINS));
  const sizes = Array.from({ length: ny * H }, () => new Float64Array(Math.ceil(ticks / every) + 1));
  const counts = new Int32Array(ny * H);
  const first: number[][] = Array.from({ length: nc }, () => []);
  const stayed: number[][] = Array.from({ length: ny }, () => []);
  // Step 2 of a path of one step stands at step 1: for telling a jump that stays from a spike that is near enough.
  const errorAt = (i: number, median: Float64Array, at: number, h: number): number => {
    const clipped = Math.min(model.clipHigh[i], Math.max(model.clipLow[i], series.values[i][at + h]));
    return (clipped - median[i * H + Math.min(h, H) - 1]) / model.scale[i];
  };
  replayPaths(model, series, { fromTick: span.fromTick - 1, toTick: span.toTick - 1 }, ({ at, state, median }) => {
    if (series.excluded?.isExcluded[at] === 1) return;
    for (let c = ny; c < nc; c++)
      first[c].push(Math.abs(series.values[c][at + 1] / model.scale[c] - zOf(model, c, state.value[c])));
    for (let i = 0; i < ny; i++) {
      const error = errorAt(i, median, at, 1);
      first[i].push(Math.abs(error));
      if (at + 2 < span.toTick) {
        const next = errorAt(i, median, at, 2);
        stayed[i].push(error * next > 0 ? Math.min(Math.abs(error), Math.abs(next)) : 0);
      }
      if ((at - span.fromTick + 1) % every !== 0) continue;
      for (let h = 1; h <= H && at + h < span.toTick; h++) {
        const size = Math.abs(errorAt(i, median, at, h));
        if (!Number.isNaN(size)) sizes[i * H + h - 1][counts[i * H + h - 1]++] = size;
      }
    }
  });
  const residualScale = Float64Array.from(first, (errors, c) =>
    robustScale(Float64Array.from(errors), model.latticeStep[c] / model.scale[c]),
  );
  const widest = normalQuantile(0.5 + coverage / 2);
  const jumps = stayed.map((errors, i) => quantile(errors, JUMP_QUANTILE) / residualScale[i]);
  return {
    residualScale,
    radius: Float64Array.from(sizes, (cell, k) =>
      counts[k] > 0 ? conformalRadius(cell.subarray(0, counts[k]), coverage) : widest,
    ),
    rejectSd: Math.max(REJECT_SD, ...jumps.map((jump) => BEYOND_JUMPS * jump)),
    rejectMaxTicks: REJECT_MOST_TICKS,
  };
}

/** A standardised value back on the unscaled axis of `reading / scale`. */
function zOf(model: Model, channel: number, value: number): number {
  return value + model.mean[channel] / model.scale[channel];
}

/** 0 where there is no error to go by. */
function quantile(errors: readonly number[], share: number): number {
  const sorted = Float64Array.from(errors.filter((error) => !Number.isNaN(error))).sort();
  return sorted.length === 0 ? 0 : sorted[Math.min(sorted.length - 1, Math.floor(share * sorted.length))];
}
