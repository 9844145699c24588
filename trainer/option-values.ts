/** Values of command-line options, checked where they are read. */
import { BUNDLE_KINDS, parseDuration, type Site } from '@stillwell/protocol';
import { InvalidArgumentError, Option } from 'commander';
import { TrainError } from './errors.ts';

/** A parser for a whole number from `least` to `most`. */
export function wholeNumber(least: number, most: number = Number.MAX_SAFE_INTEGER): (text: string) => number {
  return (text) => {
    const value = /^\d+$/.test(text) ? Number(text) : Number.NaN;
    if (!Number.isSafeInteger(value) || value < least || value > most) {
      const span = most === Number.MAX_SAFE_INTEGER ? `${least} or more` : `${least} to ${most}`;
      throw new InvalidArgumentError(`Expected a whole number, ${span}.`);
    }
    return value;
  };
}

/** A parser for a number of seconds above zero. */
export function seconds(text: string): number {
  const value = Number(text);
  if (text.trim() === '' || !Number.isFinite(value) || value <= 0) {
    throw new InvalidArgumentError('Expected a number of seconds above 0.');
  }
  return value;
}

/** A parser for a reason that a person gives, to be kept in a bundle. */
export function reason(text: string): string {
  if (text.trim() === '') throw new InvalidArgumentError('Expected the reason in words.');
  return text;
}

/** A parser for a share, between 0 and 1. */
export function share(text: string): number {
  const value = Number(text);
  if (!(value > 0 && value < 1)) throw new InvalidArgumentError('Expected a share between 0 and 1.');
  return value;
}

/** The option that asks for a kind of model. */
export function kindOption(): Option {
  return new Option(
    '--kind <kind>',
    'kind of model; auto: the best on the calibration part, the smaller where they tie',
  )
    .choices(['auto', ...BUNDLE_KINDS])
    .default('auto');
}

/** The option after how long a reading counts half; in milliseconds. */
export function halfLifeOption(): Option {
  return new Option(
    '--half-life <duration>',
    'time after which a reading in the factors counts half, such as 180d; by default all count alike',
  ).argParser((text) => {
    const ms = parseDuration(text);
    if (ms === null || ms <= 0) throw new InvalidArgumentError('Expected a length of time such as 180d.');
    return ms;
  });
}

/** Horizons that a half-life holds at least: what fades sooner is never learned. */
const LEAST_HALF_LIFE = 10;

/**
 * A half-life in ticks of a site.
 *
 * throws  TrainError 'options' where it is too short for the site's horizon
 */
export function halfLifeTicks(ms: number | undefined, site: Site): number | null {
  if (ms === undefined) return null;
  const ticks = Math.round(ms / site.tickMs);
  if (ticks >= LEAST_HALF_LIFE * site.horizon) return ticks;
  throw new TrainError(
    'options',
    `--half-life: expected at least ${LEAST_HALF_LIFE} horizons of ${site.site}, ${LEAST_HALF_LIFE * site.horizon} ticks, got ${ticks}; take a longer one`,
    { details: { ticks } },
  );
}

/** Gathers a repeated option. */
export function several(text: string, before: readonly string[] | undefined): string[] {
  return [...(before ?? []), text];
}
