/**
 * What rounding cost: the same replay with the float model and with the model as it stands in the bundle. And whether what
 * was rounded still behaves: the bank's poles are not rounded, but the loop through the forecast is closed when readings
 * stop, so it is run with none until it must have come to rest.
 */
import { createBounds, createState, forecastPath, intervalOf, type Model, update } from '@stillwell/runtime/filter';
import { TrainError } from '../errors.ts';
import type { Series } from '../history/series.ts';
import { scoreEvery } from '../judge/origin-budget.ts';
import { standingAt } from '../judge/replay.ts';
import { replayError } from '../judge/replay-scores.ts';
import { meanOf } from '../judge/scores.ts';
import type { TickSpan } from '../span.ts';

/** Standardised mean squared errors over signals and steps of the judged part, or of its end where that is long. */
export interface Audit {
  readonly floatMse: number;
  readonly quantisedMse: number;
  /** quantisedMse / floatMse. */
  readonly ratio: number;
}

/** Of more origins than are scored, so many of the last ones: the two models' errors go together, and their ratio needs few. */
const MOST_AUDITED = 2000;

/**
 * Both: whether the rounded model rests, on the ticks before the judged part, and what rounding cost there.
 *
 * shapes  as `auditErrors`
 * units   standardised²
 * throws  TrainError 'fit' as `checkAtRest`; FilterError if a model does not fit the series
 * source  none
 * cost    as `auditErrors`
 */
export function auditRounding(
  rounded: Model,
  float: Model,
  series: Series,
  judged: TickSpan,
  known: Float64Array | null,
): Audit {
  const before = { fromTick: Math.max(0, judged.fromTick - 4 * rounded.horizon), toTick: judged.fromTick };
  checkAtRest(rounded, series, before);
  return auditErrors(rounded, float, series, judged, known);
}

/**
 * Squared errors of both over the judged part; `rounded` has been replayed over it, with mean squared errors `known`;
 * null where it has not been, or not yet: then it is.
 *
 * shapes  span of indices into the series; known (ny × H)
 * units   standardised²
 * throws  FilterError if a model does not fit the series
 * source  none
 * cost    one replay; where there are very many origins, two short ones
 */
export function auditErrors(
  rounded: Model,
  float: Model,
  series: Series,
  { fromTick, toTick }: TickSpan,
  known: Float64Array | null,
): Audit {
  const isLong = scoreEvery(toTick - fromTick) > 1;
  const span = { fromTick: isLong ? toTick - MOST_AUDITED - rounded.horizon : fromTick, toTick };
  const errorOf = (model: Model): number => {
    const before = { ...span, fromTick: span.fromTick - 1 };
    const standing = isLong ? standingAt(model, series, before, before.fromTick, true) : undefined;
    return replayError(model, series, span, { standing });
  };
  const floatMse = errorOf(float);
  const quantisedMse = isLong || known === null ? errorOf(rounded) : meanOf(known);
  return { floatMse, quantisedMse, ratio: floatMse > 0 ? quantisedMse / floatMse : 1 };
}

/**
 * Runs the rounded model without readings for three horizons after a stretch of history, and checks what comes out.
 *
 * shapes  span of indices into the series, a few of them enough
 * units   the signals'
 * throws  TrainError 'fit' if a value is not finite or outside the clip
 * source  none
 * cost    as many filter steps
 */
export function checkAtRest(model: Model, series: Series, span: TickSpan): void {
  const { signalCount: ny, horizon: H } = model;
  const state = createState(model);
  const bounds = createBounds(model);
  const median = new Float64Array(ny * H);
  const lower = new Float64Array(ny * H);
  const upper = new Float64Array(ny * H);
  const readings = new Float64Array(model.channelCount);
  const end = span.toTick + 3 * H;
  for (let at = span.fromTick; at < end; at++) {
    for (let c = 0; c < readings.length; c++) readings[c] = at < span.toTick ? series.values[c][at] : Number.NaN;
    update(model, state, series.firstTick + at, readings);
  }
  forecastPath(model, state, median);
  intervalOf(model, bounds, state, median, lower, upper);
  for (let k = 0; k < median.length; k++) {
    const i = Math.floor(k / H);
    const isSound = median[k] >= model.clipLow[i] && median[k] <= model.clipHigh[i] && lower[k] <= upper[k];
    if (isSound) continue;
    throw new TrainError(
      'fit',
      `The rounded model left without readings: expected ${series.names[i]} within ${model.clipLow[i]} to ${model.clipHigh[i]}, ` +
        `got ${median[k]} at step ${(k % H) + 1}. A larger --max-bytes or a longer history mends it.`,
    );
  }
}
