/** What the second thread can judge; loaded there when asked for, since it is much. */
import { modelFromBundle } from '@stillwell/runtime/filter';
import { calibrate } from '../judge/calibrate.ts';
import { type LearnedCrossing, learnCrossing } from '../judge/crossing-table.ts';
import { hindcast } from '../judge/hindcast.ts';
import { scoreEvery } from '../judge/origin-budget.ts';
import { reliance } from '../judge/reliance.ts';
import { standingAt } from '../judge/replay.ts';
import { withCalibration } from '../kinds/candidate.ts';
import { auditRounding } from '../quantise/audit.ts';
import type { Bounded, Requests } from './requests.ts';

/** What 'bounds' leaves for 'crossings'. */
let open: (() => LearnedCrossing) | null = null;

/** Answers 'bounds': the first half of `settle`. */
export function bounded({ model, series, span, wanted }: Requests['bounds']['given']): Bounded {
  const before = { ...span, fromTick: span.fromTick - 1 };
  const isLong = scoreEvery(span.toTick - span.fromTick) > 1;
  const standing = isLong ? standingAt(model, series, before, before.fromTick) : undefined;
  const guarded = calibrate(model, series, span, wanted.coverage, null, standing);
  open = () => learnCrossing(withCalibration(model, guarded), series, span, wanted.limits);
  return { guarded, standing: standing ?? null };
}

/** Answers 'crossings'. */
export function crossed(): LearnedCrossing {
  if (open === null) throw new Error('The second thread was asked for crossings before bounds.');
  const learned = open();
  open = null;
  return learned;
}

/** Answers 'check'. */
export function checked({ bundle, float, series, judged }: Requests['check']['given']): Requests['check']['got'] {
  const model = modelFromBundle(bundle);
  return { audit: auditRounding(model, float, series, judged, null), reliance: reliance(model, series, judged) };
}

/** Answers 'cast'. */
export function cast({ model, series, span, units }: Requests['cast']['given']): Requests['cast']['got'] {
  const { horizon, mse, coverage } = hindcast(model, series, span, units);
  return { horizon, mse, coverage };
}
