/** The state message of a tick. */
import { stateMessage } from '@stillwell/protocol';
import { MISSING, STUCK } from '@stillwell/runtime/filter';
import type { Serving } from '../serving.ts';
import { headOf, type Occasion } from './moment.ts';

/** Payload for the site's state topic. */
export function statePayload(serving: Serving, occasion: Occasion): Uint8Array {
  const { model, state, checked } = serving;
  const names = checked.bundle.channels.slice(0, model.signalCount).map((channel) => channel.name);
  return stateMessage({
    ...headOf(serving, occasion, null),
    originMs: serving.tick * model.tickMs,
    tickMs: model.tickMs,
    filtered: Object.fromEntries(names.map((name, i) => [name, model.mean[i]! + model.scale[i]! * state.value[i]!])),
    state: state.x,
    missing: names.filter((_, i) => state.observed[i] === MISSING || state.observed[i] === STUCK),
  });
}
