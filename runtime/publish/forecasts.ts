/** The forecast messages of a tick: one a signal for people and controllers, one for all signals for our own parts. */
import { type BundleChannel, forecastMessage, forecastsMessage, type LimitOutlook } from '@stillwell/protocol';
import type { Serving } from '../serving.ts';
import { headOf, type Occasion } from './moment.ts';
import { type Outlook, shownProbability } from './outlooks.ts';

/** One signal's payload; `lastReadingMs` NaN where there was none. The site file's limits rule, not the bundle's. */
export function forecastPayload(
  serving: Serving,
  occasion: Occasion,
  signal: number,
  outlooks: readonly Outlook[],
  lastReadingMs: number,
): Uint8Array {
  const { model, checked } = serving;
  const channel = checked.bundle.channels[signal]!;
  const H = model.horizon;
  const round = rounding(channel);
  const path = (values: Float64Array): number[] => Array.from(values.subarray(signal * H, (signal + 1) * H), round);
  return forecastMessage({
    ...headOf(serving, occasion, signal),
    signal: channel.name,
    unit: channel.unit,
    originMs: serving.tick * model.tickMs,
    tickMs: model.tickMs,
    coverage: model.coverage,
    median: path(serving.median),
    lower: path(serving.lower),
    upper: path(serving.upper),
    limits: outlooks.map((outlook) => limitOutlook(serving, outlook)),
    inputs: inputsWord(occasion),
    inputsAhead: occasion.inputs,
    lastReadingMs: Number.isNaN(lastReadingMs) ? null : lastReadingMs,
  });
}

function inputsWord({ inputs }: Occasion): 'none' | 'held' | 'planned' {
  if (inputs.length === 0) return 'none';
  return inputs.some(({ use }) => use === 'planned') ? 'planned' : 'held';
}

/** Payload with the paths of all signals. */
export function forecastsPayload(serving: Serving, occasion: Occasion): Uint8Array {
  const { model, checked, median, lower, upper } = serving;
  return forecastsMessage({
    ...headOf(serving, occasion, null),
    bundle: checked.digest,
    sequence: checked.sequence,
    originMs: serving.tick * model.tickMs,
    tickMs: model.tickMs,
    horizon: model.horizon,
    coverage: model.coverage,
    signals: checked.bundle.channels.slice(0, model.signalCount).map((channel) => channel.name),
    median,
    lower,
    upper,
  });
}

/** As it stands in a message. */
export function limitOutlook({ tick, model }: Serving, { limit, value, probability, step }: Outlook): LimitOutlook {
  const timeMs = step === null ? null : (tick + step) * model.tickMs;
  return { limit, value, probability: shownProbability(probability), timeMs };
}

/** To a hundredth of the sensor's step or finer, in decimals: a reader gains nothing from seventeen digits. */
export function rounding(channel: BundleChannel): (value: number) => number {
  const decimals = Math.min(12, Math.max(0, Math.ceil(-Math.log10(channel.lattice.step)) + 2));
  const factor = 10 ** decimals;
  return (value) => {
    const rounded = Math.round(value * factor) / factor;
    return Number.isFinite(rounded) ? rounded : value;
  };
}
