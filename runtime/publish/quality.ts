/**
 * How far a forecast may be trusted, as a status letter in the sense of NAMUR NE 107: C while the filter warms up or
 * catches up, S where a reading lies outside what the bundle was trained on or a plan in use proved wrong, M where readings
 * are missing, repeat themselves or part from what other channels say. F: the last reading is held since no model is fit; that there
 * is none at all only health says, for then nothing is forecast.
 */
import type { Quality } from '@stillwell/protocol';
import { disagreesWith, standsStill } from '@stillwell/runtime/filter';
import type { Serving } from '../serving.ts';

/** A letter and its reason. */
export interface Judged {
  /** null: good. */
  readonly quality: Quality | null;
  readonly qualityReason: string | null;
}

/** A signal without readings for so many ticks counts as stale. */
export const STALE_TICKS = 3;

/** Judges one signal, or all of them where `signal` is null; `planFault` says how plans in use proved wrong. */
export function judge(
  serving: Serving,
  isCatchingUp: boolean,
  signal: number | null,
  planFault: string | null,
): Judged {
  if (serving.isHolding) return bad('F', 'no model is fit to forecast: the last reading is held');
  if (serving.isWarming) {
    const { warmed } = serving.bounds;
    return bad('C', `warming up: ${warmed} of ${serving.model.warmupTicks} ticks`);
  }
  if (isCatchingUp) return bad('C', 'catching up after an interruption');
  const { channels } = serving.checked.bundle;
  const from = signal ?? 0;
  const to = signal === null ? serving.model.signalCount : signal + 1;
  for (let i = from; i < to; i++)
    if (serving.isOutside[i] === 1) return bad('S', `${channels[i]!.name}: reading outside the trained range`);
  for (let i = from; i < to; i++)
    if (serving.least[i]! > 0) return bad('S', `${channels[i]!.name}: forecasts are far off; bounds are widened`);
  if (planFault !== null) return bad('S', planFault);
  for (let i = from; i < to; i++) {
    if (standsStill(serving.model, serving.state, i))
      return bad(
        'M',
        `${channels[i]!.name}: the same reading ${serving.state.repeats[i]} times, more than ever by nature`,
      );
    const other = disagreesWith(serving.model, serving.state, i);
    if (other >= 0)
      return bad(
        'M',
        `${channels[i]!.name}: no longer agrees with ${channels[other]!.name}; one of them drifts, or the plant has changed`,
      );
    const age = serving.state.age[i]!;
    if (age >= STALE_TICKS) return bad('M', `${channels[i]!.name}: no reading for ${age} ticks or more`);
  }
  return { quality: null, qualityReason: null };
}

function bad(quality: Quality, qualityReason: string): Judged {
  return { quality, qualityReason };
}
