/**
 * All that a candidate gets from the calibration part: bounds, guards and what is said of limits. Where that part is long,
 * the replays that score errors go on from one warmed-up filter, in place of warming up each for itself.
 */
import type { Model, StuckGuard } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import { withCalibration } from '../kinds/candidate.ts';
import type { Calibration } from '../quantise/float-model.ts';
import type { TickSpan } from '../span.ts';
import { calibrate } from './calibrate.ts';
import type { AskedLimit } from './crossings.ts';
import { scoreEvery } from './origin-budget.ts';
import { standingAt } from './replay.ts';
import { settleStuck } from './stuck-guard.ts';

/** What is asked for beside the model. */
export interface Settled {
  readonly coverage: number;
  /** Those that the site declares. */
  readonly limits: readonly AskedLimit[];
  /** From when on a signal stands still. */
  readonly stuck: Omit<StuckGuard, 'acts'>;
}

/**
 * Calibrates, and judges the guard against sensors that hang.
 *
 * shapes  model before calibration; span of indices into the series
 * units   standardised; limits in the signals' units
 * throws  FilterError if the model does not fit the series
 * source  none
 * cost    as `calibrate` and `settleStuck`
 */
export function settle(model: Model, series: Series, span: TickSpan, wanted: Settled): Calibration {
  const isLong = scoreEvery(span.toTick - span.fromTick) > 1;
  const before = { ...span, fromTick: span.fromTick - 1 };
  const standing = isLong ? standingAt(model, series, before, before.fromTick) : undefined;
  const guarded = calibrate(model, series, span, wanted.coverage, wanted.limits, standing);
  const stuck = settleStuck(withCalibration(model, guarded), series, span, wanted.stuck, standing);
  return { ...guarded, ...(stuck === undefined ? {} : { stuck }) };
}
