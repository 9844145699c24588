/**
 * What a sensor can show: beyond the readings of the record by half their range, or not beyond them where they pile up
 * at an end, as of a tank that overflows or a valve against its stop. A simulation clipped to it errs less.
 */
import type { SensorRange } from './ensemble.ts';
import type { DrivenRecord } from './free-run.ts';

/** Share of the range added where readings do not pile up. */
const MARGIN = 0.5;
/** Readings pile up where this share of them lies in the outermost fiftieth of the range … */
const PILED_SHARE = 0.05;
/** … and that many times more than in the fiftieth beside it. */
const PILED_RATIO = 3;

/**
 * The range of each signal.
 *
 * shapes  result (ny)
 * units   standardised
 * throws  nothing
 * source  own choice
 * cost    O(ticks)
 */
export function sensorRange(record: DrivenRecord): SensorRange {
  const ends = record.signals.map((y) => {
    const read = y.subarray(record.from, record.to).filter((value) => !Number.isNaN(value));
    return { high: upperEnd(read), low: -upperEnd(read.map((value) => -value)) };
  });
  return { low: Float64Array.from(ends, ({ low }) => low), high: Float64Array.from(ends, ({ high }) => high) };
}

function upperEnd(read: Float64Array): number {
  let low = Number.POSITIVE_INFINITY;
  let high = Number.NEGATIVE_INFINITY;
  for (const value of read) {
    low = Math.min(low, value);
    high = Math.max(high, value);
  }
  const bin = (high - low) / 50;
  const top = read.filter((value) => value > high - bin).sort();
  const next = read.filter((value) => value <= high - bin && value > high - 2 * bin).length;
  const isPiled = top.length >= PILED_SHARE * read.length && top.length >= PILED_RATIO * next;
  return isPiled ? top[top.length >> 1] : high + MARGIN * (high - low) + Number.EPSILON;
}
