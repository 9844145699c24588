/**
 * How every signal is, for the health message: all that is the matter with it in words, the gravest with its letter and a
 * plain reason. Of a good one only its name and the age of its last reading.
 */
import type { Quality, SignalHealth, SignalWord } from '@stillwell/protocol';
import { disagreesWith, standsStill } from '@stillwell/runtime/filter';
import type { Serving } from '../serving.ts';
import type { SignalWatch } from '../signals/watch.ts';
import { STALE_TICKS } from './quality.ts';

/** One thing that is the matter. */
interface Finding {
  readonly word: SignalWord;
  readonly quality: Quality;
  readonly reason: string;
}

/**
 * Entries in the site's order.
 *
 * nowMs          what ages are counted to
 * lastReadingMs  (nc) NaN before the first
 */
export function signalsHealth(
  serving: Serving,
  watch: SignalWatch,
  lastReadingMs: Float64Array,
  nowMs: number,
): SignalHealth[] {
  return serving.checked.bundle.channels.slice(0, serving.model.signalCount).map(({ name }, i) => {
    const findings = findingsOf(serving, watch, i);
    const gravest = findings[0];
    const age = Math.round((nowMs - lastReadingMs[i]!) / 1000);
    return {
      signal: name,
      last_reading_s: Number.isFinite(age) ? Math.max(0, age) : null,
      ...(gravest === undefined
        ? {}
        : { quality: gravest.quality, reason: gravest.reason, words: findings.map(({ word }) => word) }),
      ...(watch.refused[i] === 0 ? {} : { refused: watch.refused[i]! }),
      ...(watch.passedOver[i] === 0 ? {} : { passed_over: watch.passedOver[i]! }),
    };
  });
}

/** The gravest first: what makes its forecast unfit, then what makes its readings doubtful. */
function findingsOf(serving: Serving, watch: SignalWatch, i: number): Finding[] {
  const { model, state, checked } = serving;
  const found: Finding[] = [];
  const add = (word: SignalWord, quality: Quality, reason: string): void => void found.push({ word, quality, reason });
  if (serving.isOutside[i] === 1) add('out-of-range', 'S', 'the last reading lies outside the trained range');
  if (watch.isImplausible(i)) {
    add('implausible', 'S', `readings lie to one side of their forecasts, ${wider(watch, i)} times as far as usual`);
  }
  if (standsStill(model, state, i))
    add('stuck', 'M', `the same reading ${state.repeats[i]} times, more than by nature`);
  if (state.age[i]! >= STALE_TICKS) add('absent', 'M', `no reading folded in for ${state.age[i]} ticks or more`);
  const other = disagreesWith(model, state, i);
  if (other >= 0) {
    const name = checked.bundle.channels[other]!.name;
    add('disagreeing', 'M', `no longer agrees with ${name}; one of them drifts, or the plant has changed`);
  }
  if (watch.isNoisy(i)) add('noisy', 'M', `scatters ${wider(watch, i)} times as much as when it was calibrated`);
  if (watch.isJumping(i))
    add('jumping', 'M', 'one jump or spike after another; a loose contact, or a plant that surges');
  if (watch.isDrifting(i))
    add('drifting', 'M', 'forecasts err to one side, again and again: the sensor or the plant drifts');
  return found;
}

function wider(watch: SignalWatch, i: number): string {
  return watch.timesWider(i).toFixed(1);
}
