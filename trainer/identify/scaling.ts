/**
 * How each channel is brought to zero mean and unit variance, from the learning part alone, and the widest values folded in,
 * for which the calibration part counts too. The range is robust: readings absurdly far from the bulk neither move the mean nor open the clip.
 */
import { TrainError } from '../errors.ts';
import type { Series } from '../history/series.ts';

/** One channel's scaling, in its unit. */
export interface Scaling {
  readonly mean: number;
  /** Population standard deviation; 1 for a constant channel. */
  readonly scale: number;
  readonly clipLow: number;
  readonly clipHigh: number;
  readonly isConstant: boolean;
}

/** Readings beyond the 1st and 99th percentile by more than this many times their distance are not believed. */
const BELIEVED_RANGES = 10;
/** Share of the robust range added on each side before a reading is clipped. */
const CLIP_SHARE = 0.75;
const LEAST_READINGS = 16;

/**
 * Scalings of all channels.
 *
 * shapes  learnTicks the length of the learning part from the series' start; clipTicks that of learning and calibration
 *         part together; steps (nc) lattice steps; hasEarlier: the series is the newest part of a longer one; result (nc)
 * units   the signals'
 * throws  TrainError 'history' naming a channel without readings, or where every signal is constant
 * source  own choice of robust range; the clip's share as measured to be wide enough on real records
 * cost    O(nc T log T)
 */
export function findScalings(
  series: Series,
  learnTicks: number,
  clipTicks: number,
  steps: readonly number[],
  hasEarlier = false,
): Scaling[] {
  const scalings = series.values.map((y, c) => {
    const read = finite(y.subarray(0, learnTicks));
    if (read.length < LEAST_READINGS) throw tooFew(series, c, read.length, learnTicks, hasEarlier);
    const sorted = read.slice().sort();
    const scaling = scalingOf(read, sorted, steps[c]);
    const later = finite(y.subarray(learnTicks, clipTicks));
    return later.length === 0 || scaling.isConstant ? scaling : withRoomFor(scaling, sorted, later.sort());
  });
  if (scalings.slice(0, series.signalCount).every((scaling) => scaling.isConstant)) {
    throw new TrainError(
      'history',
      `Every signal (${series.names.slice(0, series.signalCount).join(', ')}) keeps one value throughout the learning part; ` +
        'expected at least one that moves. Check the columns, the resolution and the span of the history.',
    );
  }
  return scalings;
}

/** The finite ones, in a new array. */
function finite(values: Float64Array): Float64Array {
  const kept = new Float64Array(values.length);
  let count = 0;
  // 0 for a finite value alone.
  for (let k = 0; k < values.length; k++) if (values[k] - values[k] === 0) kept[count++] = values[k];
  return kept.subarray(0, count);
}

function scalingOf(read: Float64Array, sorted: Float64Array, step: number): Scaling {
  const [low, high] = believedRange(sorted);
  let sum = 0;
  let count = 0;
  for (let k = 0; k < read.length; k++) {
    const value = read[k];
    if (value < low || value > high) continue;
    sum += value;
    count++;
  }
  const mean = sum / count;
  let squares = 0;
  for (let k = 0; k < read.length; k++) {
    const value = read[k];
    if (value >= low && value <= high) squares += (value - mean) * (value - mean);
  }
  const scale = Math.sqrt(squares / count);
  // Rounding alone leaves a share of 1e-12 or so of the level.
  const isConstant = !(scale > 1e-9 * Math.max(Math.abs(mean), step, Number.MIN_VALUE));
  const range = isConstant ? Math.max(Math.abs(mean), 100 * step) : high - low;
  return {
    mean: isConstant ? low : mean,
    scale: isConstant ? 1 : scale,
    clipLow: low - CLIP_SHARE * range,
    clipHigh: high + CLIP_SHARE * range,
    isConstant,
  };
}

/** Clips that also hold what came after the learning part: a plant that grows out of its past is not cut off by it. */
function withRoomFor(scaling: Scaling, sorted: Float64Array, later: Float64Array): Scaling {
  const [low, high] = believedRange(merged(sorted, later));
  const room = CLIP_SHARE * (high - low);
  return {
    ...scaling,
    clipLow: Math.min(scaling.clipLow, low - room),
    clipHigh: Math.max(scaling.clipHigh, high + room),
  };
}

/** Two sorted lists as one; −0 before 0, as sorting has it. */
function merged(a: Float64Array, b: Float64Array): Float64Array {
  const out = new Float64Array(a.length + b.length);
  let i = 0;
  let j = 0;
  for (let k = 0; k < out.length; k++) {
    const isFirst = j === b.length || (i < a.length && (a[i] < b[j] || (a[i] === b[j] && Object.is(a[i], -0))));
    out[k] = isFirst ? a[i++] : b[j++];
  }
  return out;
}

/** Smallest and largest reading that is believed. */
function believedRange(sorted: Float64Array): readonly [number, number] {
  for (const tail of [0.01, 0.001]) {
    const low = sorted[Math.floor(tail * (sorted.length - 1))];
    const high = sorted[Math.ceil((1 - tail) * (sorted.length - 1))];
    const reach = BELIEVED_RANGES * (high - low);
    if (!(reach > 0)) continue;
    return [
      sorted.find((value) => value >= low - reach) ?? low,
      sorted.findLast((value) => value <= high + reach) ?? high,
    ];
  }
  return [sorted[0], sorted[sorted.length - 1]];
}

function tooFew(series: Series, channel: number, got: number, ticks: number, hasEarlier: boolean): TrainError {
  const role = channel < series.signalCount ? 'Signal' : 'Input';
  const newest = hasEarlier
    ? ` This history is long, and of a long one only the newest ${series.ticks.toLocaleString('en')} ticks count for whether ` +
      `${role === 'Signal' ? 'a signal' : 'an input'} is there: one that stopped before them cannot be learned.`
    : '';
  return new TrainError(
    'history',
    `${role} ${series.names[channel]}: expected at least ${LEAST_READINGS} readings in the learning part of ${ticks} ticks, ` +
      `got ${got}.${newest} Check its column in the history, or take it out of the site file.`,
    { details: { channel: series.names[channel], got } },
  );
}
