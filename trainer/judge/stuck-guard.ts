/**
 * Judges the guard against sensors that hang where it is set. The calibration part is replayed as it came, with the guard and
 * without, and scored on all readings and on those that are believed: there it may cost next to nothing. And it is
 * replayed with sensors made to hang, one after another, a tenth of the time each: there it must gain, since a plant whose
 * model does worse on its own than by a standing reading is better left with that. A guard that fails only tells.
 */
import type { Model, StuckGuard } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import { withoutStuck } from '../identify/stuck.ts';
import type { TickSpan } from '../span.ts';
import { type PathMoment, replayPaths, type Standing } from './replay.ts';
import { verdictSteps } from './steps.ts';

/** Rise of either squared error that is put up with, on geometric average over the signals. */
const MOST_COST = 0.001;
/** Fall of the squared error with sensors that hang from which the guard acts. */
const LEAST_GAIN = 0.005;
/**
 * Ticks replayed at most, the first ones. Each of eight signals hangs for six hundred of them, some twenty times; the gain
 * that is asked for is a two-hundredth, and a guard that gains is seen to gain tens of times that.
 */
const MOST_TICKS = 6000;
/** Made to hang for one tick in so many. */
const ONE_IN = 10;

/**
 * The guard, or undefined where no signal can be told to stand still.
 *
 * shapes  model calibrated, without that guard; span of indices into the series; standing as in `calibrate`
 * units   as the series
 * throws  FilterError if the model does not fit the series
 * source  own choice
 * cost    two replays of the span, and two more where a sensor hung in it
 */
export function settleStuck(
  model: Model,
  series: Series,
  span: TickSpan,
  found: Omit<StuckGuard, 'acts'>,
  standing?: Standing,
): StuckGuard | undefined {
  if (found.ticks.every((ticks) => ticks === 0)) return undefined;
  const within = { fromTick: span.fromTick, toTick: Math.min(span.toTick, span.fromTick + MOST_TICKS) };
  const acting = { ...found, acts: true };
  const believed = withoutStuck(series, found);
  const risesBy = (seen: Series): { readonly all: number; readonly believed: number } => {
    const without = squares(model, seen, series, believed, within, standing);
    const guarded = squares({ ...model, stuck: acting }, seen, series, believed, within, standing);
    return { all: rise(guarded.all, without.all), believed: rise(guarded.believed, without.believed) };
  };
  const acts =
    risesBy(madeToHang(series, found, within, model.horizon)).believed < -LEAST_GAIN &&
    (!differs(series, believed, within) || isCheap(risesBy(series)));
  return { ...found, acts };
}

function isCheap(rises: { readonly all: number; readonly believed: number }): boolean {
  return rises.all <= MOST_COST && rises.believed <= MOST_COST;
}

/** Each guarded signal hangs for twice its guard's ticks, then for a horizon more than that, and so on in turn. */
function madeToHang(
  series: Series,
  { ticks }: Omit<StuckGuard, 'acts'>,
  { fromTick, toTick }: TickSpan,
  horizon: number,
): Series {
  const values = series.values.map((y, c) => {
    if (c >= series.signalCount || ticks[c] === 0) return y;
    const out = y.slice();
    let length = 2 * ticks[c];
    for (let t = fromTick + Math.round((ONE_IN * length * c) / series.signalCount); t < toTick; ) {
      out.fill(y[t], t, Math.min(toTick, t + length));
      t += ONE_IN * length;
      length = length === 2 * ticks[c] ? length + horizon : 2 * ticks[c];
    }
    return out;
  });
  return { ...series, values };
}

/** Geometric mean over the signals of one error over the other, less one. */
function rise(ours: Float64Array, theirs: Float64Array): number {
  let sum = 0;
  let count = 0;
  ours.forEach((square, i) => {
    if (!(square > 0 && theirs[i] > 0)) return;
    sum += Math.log(square / theirs[i]);
    count++;
  });
  return count === 0 ? 0 : Math.exp(sum / count) - 1;
}

function differs(series: Series, believed: Series, { fromTick, toTick }: TickSpan): boolean {
  return series.values.some((y, c) => {
    for (let t = fromTick; t < toTick; t++) if (Number.isNaN(believed.values[c][t]) && !Number.isNaN(y[t])) return true;
    return false;
  });
}

/** (ny) summed squared errors over a few steps, on all readings of the truth and on believed ones. */
function squares(
  model: Model,
  seen: Series,
  truth: Series,
  believed: Series,
  span: TickSpan,
  standing: Standing | undefined,
): { readonly all: Float64Array; readonly believed: Float64Array } {
  const { signalCount: ny, horizon: H } = model;
  const out = { all: new Float64Array(ny), believed: new Float64Array(ny) };
  const steps = verdictSteps(H);
  const compare = ({ at, median }: PathMoment): void => {
    for (let i = 0; i < ny; i++) {
      for (const h of steps) {
        if (at + h >= span.toTick) break;
        const error = (truth.values[i][at + h] - median[i * H + h - 1]) / model.scale[i];
        if (Number.isNaN(error)) continue;
        out.all[i] += error * error;
        if (!Number.isNaN(believed.values[i][at + h])) out.believed[i] += error * error;
      }
    }
  };
  replayPaths(model, seen, span, compare, { standing });
  return out;
}
