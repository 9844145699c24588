/**
 * Sets the guard that passes over wild readings, and judges it where it is set: the calibration part, whose wild readings
 * are left out already, is replayed with the guard. What it costs there it costs on sound readings, and it is widened until
 * that is next to nothing.
 */
import type { Model } from '@stillwell/runtime/filter';
import { PASSED_OVER } from '@stillwell/runtime/filter';
import { quantiles } from '../history/order-statistics.ts';
import type { Series } from '../history/series.ts';
import type { TickSpan } from '../span.ts';
import { replayPaths } from './replay.ts';
import { REJECT_MOST_TICKS, REJECT_SD } from './robust-scale.ts';
import { verdictSteps } from './steps.ts';

/** The guard opens to this far beyond the jumps that stayed, where a plant jumps by itself. */
const BEYOND_JUMPS = 1.2;
const JUMP_QUANTILE = 0.995;
/** Rise of the squared error of any signal on sound readings that is put up with. */
const MOST_COST = 0.001;
const WIDER = 1.5;
const MOST_ROUNDS = 8;

/** The guard as set, and what came of it on the calibration part. */
export interface Guard {
  readonly rejectSd: number;
  readonly rejectMaxTicks: number;
  /** Readings that it passed over. */
  readonly passedOver: number;
  /** Largest rise of a signal's squared error; negative where it helped everywhere. */
  readonly guardCost: number;
}

/**
 * Sets and judges it.
 *
 * shapes  model with residualScale and radius; span of indices into the series; first, second (nc, ny) of (ticks of the
 *         span): errors one and two steps after the tick before each
 * units   standardised
 * throws  FilterError if the model does not fit the series
 * source  Hampel identifier: Hampel, J. American Statistical Association 69 (1974); ten deviations and the widening are own
 *         choices
 * cost    nothing where no reading lies beyond the guard; else two replays of the span, and one more for every widening
 */
export function settleGuard(
  model: Model,
  series: Series,
  span: TickSpan,
  first: readonly Float64Array[],
  second: readonly Float64Array[],
): Guard {
  const scaled = second.map((next, i) => stayed(first[i], next).map((jump) => jump / model.residualScale[i]));
  const jumps = scaled.map((sizes) => quantiles(sizes, [JUMP_QUANTILE])[0]);
  let rejectSd = Math.max(REJECT_SD, ...jumps.map((jump) => (Number.isNaN(jump) ? 0 : BEYOND_JUMPS * jump)));
  const isBeyond = (limit: number): boolean =>
    second.some((_, i) => first[i].some((error) => Math.abs(error) > limit * model.residualScale[i]));
  const set = (passedOver: number, guardCost: number): Guard => ({
    rejectSd,
    rejectMaxTicks: REJECT_MOST_TICKS,
    passedOver,
    guardCost,
  });
  let open: Float64Array | null = null;
  for (let round = 0; isBeyond(rejectSd); round++, rejectSd *= WIDER) {
    open ??= replayed(model, series, span).squares;
    const kept = replayed({ ...model, rejectSd, rejectMaxTicks: REJECT_MOST_TICKS }, series, span);
    const cost = Math.max(...kept.squares.map((sum, i) => (open![i] > 0 ? sum / open![i] - 1 : 0)));
    if (cost <= MOST_COST || round === MOST_ROUNDS) return set(kept.passedOver, cost);
  }
  return set(0, 0);
}

/** Size of the jumps that stay: the smaller of two errors on the same side, one and two steps on; 0 where it went back. */
function stayed(first: Float64Array, second: Float64Array): Float64Array {
  return first.map((error, k) => {
    if (Number.isNaN(error) || Number.isNaN(second[k])) return Number.NaN;
    return error * second[k] > 0 ? Math.min(Math.abs(error), Math.abs(second[k])) : 0;
  });
}

/** Mean squared errors by signal over a few steps, and readings passed over. */
function replayed(model: Model, series: Series, span: TickSpan): { squares: Float64Array; passedOver: number } {
  const { signalCount: ny, horizon: H } = model;
  const squares = new Float64Array(ny);
  const steps = verdictSteps(H);
  let passedOver = 0;
  replayPaths(model, series, { fromTick: span.fromTick - 1, toTick: span.toTick }, ({ at, state, median }) => {
    for (let i = 0; i < ny; i++) {
      if (at >= span.fromTick && state.observed[i] === PASSED_OVER) passedOver++;
      for (const h of steps) {
        if (at + h >= span.toTick) break;
        const reading = Math.min(model.clipHigh[i], Math.max(model.clipLow[i], series.values[i][at + h]));
        const error = (reading - median[i * H + h - 1]) / model.scale[i];
        if (!Number.isNaN(error)) squares[i] += error * error;
      }
    }
  });
  return { squares, passedOver };
}
