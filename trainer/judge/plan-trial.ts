/**
 * What a plan would have been worth: the replay of a history is told the future of the planned inputs, the true one or a
 * wrong one. Shows at once that the forecast listens to a plan, and what it costs where the plan is not kept.
 */
import type { Model } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import type { TickSpan } from '../span.ts';

/** No plan; what truly came; what came at another time of the span. */
export type PlanTrial = 'none' | 'perfect' | 'wrong';

/** Fills the plan of the tick at an index: (nu × H) standardised, NaN where nothing is planned. */
export type Planner = (at: number, out: Float64Array) => void;

/** Share of a period by which a wrong plan is late beside whole ones: no schedule repeats itself after it. */
const OUT_OF_STEP = 0.37;
/** Whole periods, or ticks, that a wrong plan is off, as a share of the span. */
const FAR_OFF = 0.4;

/**
 * The planner of a trial; null for none.
 *
 * A wrong plan is what the inputs did about two fifths of the span later, wrapped at its end, and out of step with the
 * season: the right sort of plan, of another time.
 *
 * shapes  span of indices into the series; planned counted from the first input; after the end of the span nothing is known
 * units   standardised; missing readings hold the last one, as commands do
 * throws  nothing
 * source  own choice
 * cost    one copy of the planned inputs
 */
export function plannerOf(
  trial: PlanTrial,
  model: Model,
  series: Series,
  span: TickSpan,
  planned: readonly number[],
): Planner | null {
  if (trial === 'none') return null;
  const { signalCount, horizon: H } = model;
  const length = span.toTick - span.fromTick;
  const shift = trial === 'perfect' ? 0 : wrongBy(length, model.seasonalPeriod);
  const known = planned.map((u) => ({ u, values: standardised(model, series, signalCount + u) }));
  return (at, out) => {
    out.fill(Number.NaN);
    for (const { u, values } of known) {
      for (let h = 1; h <= H && at + h < span.toTick; h++) {
        const from = at + h - span.fromTick + shift;
        out[u * H + h - 1] = values[shift === 0 || from < 0 ? at + h : span.fromTick + (from % length)];
      }
    }
  };
}

/** Ticks by which a wrong plan is off. */
function wrongBy(length: number, period: number): number {
  if (period === 0 || period > length / 2) return Math.max(1, Math.floor(FAR_OFF * length));
  return period * Math.floor((FAR_OFF * length) / period) + Math.max(1, Math.round(OUT_OF_STEP * period));
}

function standardised(model: Model, series: Series, channel: number): Float64Array {
  let last = 0;
  return series.values[channel].map((value) => {
    if (!Number.isNaN(value)) last = (value - model.mean[channel]) / model.scale[channel];
    return last;
  });
}
