/**
 * When a warning opens and closes, as the site file says it: for the whole site, for a signal, or for one limit of it; the
 * nearest word counts. Opening and closing lie apart, and closing takes its time, so that a chance that hovers about one
 * value does not open and close the same warning all day.
 */
import { z } from 'zod';
import { checked } from './checked-value.ts';
import { parseDuration } from './duration.ts';
import type { Fault } from './issue.ts';
import type { Limits, Site } from './site.ts';

/** When a warning opens and closes. */
export interface WarnRule {
  /** Opens at this probability of crossing within the horizon or above; 1: never. */
  readonly open: number;
  /** Closes once the probability has stayed below this … */
  readonly close: number;
  /** … for so many ticks in a row. */
  readonly hold: number;
}

/** What is said of a rule at one place; null: as the place around it says. */
export type WarnWords = { readonly [K in keyof WarnRule]: number | null };

/** What a signal says of its own warnings. */
export interface SignalWarn extends WarnWords {
  readonly limits: Readonly<Record<keyof Limits, WarnWords | null>>;
}

/** As soon as a crossing is more likely than not; measured on the demo's plants, see runtime/README.md. */
const DEFAULT_OPEN = 0.5;
/** Where only `open` is said, `close` is this share of it. */
const CLOSE_SHARE = 0.6;
/** Left out, `hold` is this share of the horizon. */
const HOLD_SHARE = 1 / 12;

const share = checked('a probability above 0 and at most 1', (value) =>
  typeof value === 'number' && value > 0 && value <= 1 ? value : undefined,
);

/** Ticks, or a duration in ms. */
const hold = checked<{ ticks: number } | { ms: number }>(
  'a whole number of ticks from 1 up, or a duration such as "10min"',
  (value) => {
    if (typeof value === 'number') return Number.isSafeInteger(value) && value >= 1 ? { ticks: value } : undefined;
    const ms = typeof value === 'string' ? parseDuration(value) : null;
    return ms !== null && ms > 0 ? { ms } : undefined;
  },
);

const words = { open: share.nullish(), close: share.nullish(), hold: hold.nullish() };

/** The map under `warn` of the site, or of one limit. */
export const warnSchema = z.strictObject(words);
/** The map under a signal's `warn`. */
export const signalWarnSchema = z.strictObject({
  ...words,
  high_high: warnSchema.nullish(),
  high: warnSchema.nullish(),
  low: warnSchema.nullish(),
  low_low: warnSchema.nullish(),
});

type WarnEntry = z.output<typeof warnSchema>;

const toWords = (entry: WarnEntry, tickMs: number): WarnWords => ({
  open: entry.open ?? null,
  close: entry.close ?? null,
  hold: !entry.hold ? null : 'ticks' in entry.hold ? entry.hold.ticks : Math.ceil(entry.hold.ms / tickMs),
});

const over = (rule: WarnRule, said: WarnWords | null): WarnRule => {
  if (said === null) return rule;
  // A threshold moved without a word of the other would often end up on its wrong side.
  const near = said.open === null ? rule : { ...rule, open: said.open, close: closeFor(said.open) };
  return { ...near, close: said.close ?? near.close, hold: said.hold ?? near.hold };
};

/** To six digits: 0.6 × 0.7 is written 0.42. */
const closeFor = (open: number): number => Number((CLOSE_SHARE * open).toPrecision(6));

/** The rule of a site whose file says nothing. */
export const defaultWarnRule = (horizon: number): WarnRule => ({
  open: DEFAULT_OPEN,
  close: closeFor(DEFAULT_OPEN),
  hold: Math.max(1, Math.round(HOLD_SHARE * horizon)),
});

/** The site's own rule, every default filled in. */
export const toWarnRule = (entry: WarnEntry | null, horizon: number, tickMs: number): WarnRule =>
  over(defaultWarnRule(horizon), entry === null ? null : toWords(entry, tickMs));

/** What a signal says. */
export const toSignalWarn = (entry: z.output<typeof signalWarnSchema> | null, tickMs: number): SignalWarn | null => {
  if (entry === null) return null;
  const of = (one: WarnEntry | null | undefined): WarnWords | null => (one ? toWords(one, tickMs) : null);
  const { high_high, high, low, low_low } = entry;
  return {
    ...toWords(entry, tickMs),
    limits: { highHigh: of(high_high), high: of(high), low: of(low), lowLow: of(low_low) },
  };
};

/** The rule of one limit. signal  counted from the first signal */
export const warnRuleOf = (site: Site, signal: number, limit: keyof Limits): WarnRule => {
  const own = site.signals[signal]!.warn;
  return own === null ? site.warn : over(over(site.warn, own), own.limits[limit]);
};

const KEYS: readonly (readonly [keyof Limits, string])[] = [
  ['highHigh', 'high_high'],
  ['high', 'high'],
  ['low', 'low'],
  ['lowLow', 'low_low'],
];

/** Rules whose closing does not lie below their opening, and words about limits that are not set. */
export const warnFaults = (site: Site): readonly Fault[] => {
  const ofRule = ({ open, close }: WarnRule, path: readonly PropertyKey[]): Fault[] => {
    if (close < open) return [];
    return [{ path, isUnknownKey: false, text: `expected close below open (${open}), got close ${close}` }];
  };
  const faults = ofRule(site.warn, ['warn']);
  for (const [i, { warn, limits }] of site.signals.entries()) {
    if (warn === null || faults.length > 0) continue;
    const path = ['signals', i, 'warn'];
    const own = ofRule(over(site.warn, warn), path);
    faults.push(...own);
    for (const [limit, key] of KEYS) {
      if (warn.limits[limit] === null) continue;
      if (limits[limit] === null) {
        const text = `expected a limit that the signal has, got "${key}"; set it under limits`;
        faults.push({ path: [...path, key], isUnknownKey: false, text });
      } else if (own.length === 0) faults.push(...ofRule(warnRuleOf(site, i, limit), [...path, key]));
    }
  }
  return faults;
};

/** As it stands in a file. */
export const plainWarn = ({ open, close, hold }: WarnWords): Record<string, number> =>
  Object.fromEntries(
    Object.entries({ open, close, hold }).filter((pair): pair is [string, number] => pair[1] !== null),
  );

/** A signal's words as they stand in a file; null where it has none. */
export const plainSignalWarn = (warn: SignalWarn | null): Record<string, unknown> | null => {
  if (warn === null) return null;
  const limits = KEYS.flatMap(([limit, key]) => {
    const said = warn.limits[limit];
    return said === null ? [] : [[key, plainWarn(said)] as const];
  });
  return { ...plainWarn(warn), ...Object.fromEntries(limits) };
};
