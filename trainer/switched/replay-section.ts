/**
 * Runs a section over a completed history as the filter would, for learning what its mean paths miss.
 */
import {
  createRollout,
  createSwitchedCore,
  deriveSwitched,
  type Rollout,
  rollOut,
  type SwitchedCore,
  type SwitchedSection,
  stepSwitched,
} from '@stillwell/runtime/filter';
import type { SwitchedInput } from './learn.ts';

/** What is seen at an origin; the arrays are overwritten at the next. */
export interface SectionMoment {
  readonly at: number;
  readonly core: SwitchedCore;
  /** (nc) */
  readonly value: Float64Array;
  /** ((n + k) × H) mean paths of driven, then near-discrete signals. */
  readonly sums: Float64Array;
}

/**
 * Runs over ticks 0 … to − 1 and visits every `stride`-th origin from `from` on.
 *
 * shapes  clips (nc) low and high
 * units   standardised
 * throws  nothing
 * source  none
 * cost    one roll-out an origin
 */
export function replaySection(
  section: SwitchedSection,
  input: SwitchedInput,
  clips: { readonly low: Float64Array; readonly high: Float64Array },
  span: { readonly from: number; readonly to: number; readonly stride: number },
  visit: (moment: SectionMoment) => void,
): void {
  const { values, isRead, horizon, firstTick } = input;
  const core = createSwitchedCore(section);
  const rollout: Rollout = createRollout(section, horizon, clips.low, clips.high);
  const value = new Float64Array(values.length);
  const read = new Uint8Array(values.length);
  for (let t = 0; t < span.to; t++) {
    section.driven.forEach((c, i) => {
      core.previous[i] = value[c];
      core.wasRead[i] = read[c];
    });
    for (let c = 0; c < values.length; c++) {
      value[c] = Math.min(clips.high[c], Math.max(clips.low[c], values[c][t]));
      read[c] = isRead[c][t];
    }
    stepSwitched(section, core, firstTick + t, value, read);
    deriveSwitched(section, core, firstTick + t, value);
    if (t < span.from || (t - span.from) % span.stride !== 0) continue;
    rollOut(section, core, rollout, firstTick + t, value, horizon, horizon);
    visit({ at: t, core, value, sums: rollout.sums });
  }
}
