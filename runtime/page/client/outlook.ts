/** What is to be said of a signal in short: whether its forecast may be relied on, and what nears a limit. */
import type { Plant } from './plant.ts';
import { chanceText, letterWord, limitWord, numberText, spanText, withoutName, withUnit } from './words.ts';
import type { Zone } from './zone.ts';

/** A signal in short. */
export interface Outlook {
  /** Status letter; null: good. */
  readonly letter: string | null;
  /** Why not to rely on the forecast; null: nothing speaks against it. */
  readonly reason: string | null;
  /** Of the limits with an open warning the one most likely crossed. */
  readonly limit: { readonly limit: string; readonly probability: number } | null;
}

/** The outlook of one signal. nowMs  null where the time is not known */
export function outlookOf(plant: Plant, signal: number, nowMs: number | null): Outlook {
  const facts = plant.facts.signals[signal];
  const forecast = plant.forecast(signal);
  const { name } = plant.site.signals[signal]!;
  const open = plant.facts.warnings.filter((one) => one.signal === name);
  const limit = open.reduce<Outlook['limit']>(
    (most, one) => (most === null || one.probability > most.probability ? one : most),
    null,
  );
  const { quality = null, reason = null } = facts ?? {};
  const isOver = forecast !== null && nowMs !== null && nowMs > Date.parse(forecast.valid_until);
  if (isOver && quality !== 'F')
    return { letter: quality, reason: 'The forecast has expired: none came after it in time', limit };
  return { letter: quality, reason: reason === null ? null : withoutName(reason, name), limit };
}

/** Whether somebody should look at it. */
export function needsLook({ letter, reason, limit }: Outlook): boolean {
  return letter !== null || reason !== null || limit !== null;
}

/** Letter and its word; empty where all is well. */
export function letterText({ letter, reason }: Outlook): string {
  if (letter !== null) return `${letter} ${letterWord(letter)}`;
  return reason === null ? '' : 'expired';
}

/** One line a limit that is set, in the site file's order. */
export function limitLines(plant: Plant, signal: number, zone: Zone): string[] {
  const { site } = plant;
  const channel = site.signals[signal]!;
  const forecast = plant.forecast(signal);
  const set = [
    ['high_high', channel.limits.highHigh],
    ['high', channel.limits.high],
    ['low', channel.limits.low],
    ['low_low', channel.limits.lowLow],
  ] as const;
  const within = spanText((site.horizon * site.tick_ms) / 1000);
  return set.flatMap(([name, value]) => {
    if (value === null) return [];
    const head = `${limitWord(name)} ${withUnit(numberText(value, channel.decimals), channel.unit)}`;
    const outlook = forecast?.limits.find(({ limit }) => limit === name);
    if (outlook === undefined) return [`${head}: no forecast`];
    const chance = `${chanceText(outlook.probability)} within ${within}`;
    if (outlook.time === null) return [`${head}: ${chance}`];
    const at = Date.parse(outlook.time);
    return [`${head}: ${chance}, likely by ${zone.near(at, plant.newest * site.tick_ms, site.tick_ms)}`];
  });
}
