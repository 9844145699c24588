/**
 * Which time a bundle has seen, as its provenance says: what it learned from, and up to where it learned or was calibrated.
 */
import type { Bundle } from '@stillwell/protocol';
import { TrainError } from './errors.ts';
import type { TickSpan } from './span.ts';

/**
 * Reads the spans out of the provenance.
 *
 * throws  TrainError 'bundle' when the options are no JSON object, so that seen time is never judged as unseen in silence
 */
export function learnedSpans(bundle: Bundle): { readonly learn: TickSpan | null; readonly seenTo: number } {
  const lastTick = Math.round(bundle.provenance.lastMs / bundle.tickMs) + 1;
  const options = optionsOf(bundle);
  const calibrate = spanOf(options.calibrate);
  return { learn: spanOf(options.learn), seenTo: Math.max(lastTick, calibrate?.toTick ?? lastTick) };
}

function optionsOf(bundle: Bundle): { readonly learn?: unknown; readonly calibrate?: unknown } {
  let options: unknown;
  try {
    options = JSON.parse(bundle.provenance.options);
  } catch (cause) {
    throw new TrainError('bundle', unreadable(bundle, (cause as Error).message), { cause });
  }
  if (typeof options === 'object' && options !== null) return options;
  throw new TrainError('bundle', unreadable(bundle, `got ${JSON.stringify(options)}`));
}

function unreadable(bundle: Bundle, what: string): string {
  return (
    `bundle of ${bundle.site}: provenance.options: expected the JSON object that a fit writes (${what}); ` +
    'what it learned from is not known, so it cannot be judged: fit the site again'
  );
}

function spanOf(value: unknown): TickSpan | null {
  if (!Array.isArray(value) || value.length !== 2) return null;
  const [fromTick, toTick] = value as unknown[];
  return Number.isSafeInteger(fromTick) && Number.isSafeInteger(toTick)
    ? { fromTick: fromTick as number, toTick: toTick as number }
    : null;
}
