/**
 * The site file: one YAML document a site, read by the trainer and by the gateway alike.
 */
import { deepFreeze } from './freeze.ts';
import { listFaults } from './issue.ts';
import { MAX_SITE_FILE_BYTES } from './limits.ts';
import { crossFaults } from './site-check.ts';
import { type Exclusion, excludeFaults, toExclusion } from './site-exclude.ts';
import type { PayloadReading } from './site-payload.ts';
import { type SiteFile, siteFileKeys, siteFileSchema } from './site-schema.ts';
import { type SignalWarn, toSignalWarn, toWarnRule, type WarnRule } from './site-warn.ts';
import { readYamlFile, type YamlKind } from './yaml-file.ts';

export { documentPayload, type PayloadReading } from './site-payload.ts';

/** How a tick makes one value of the readings that fall into it. */
export type Aggregate = 'last' | 'mean' | 'min' | 'max' | 'sum' | 'increment';

/** Levels that operators care about, in the signal's unit; null where none is set. */
export interface Limits {
  readonly highHigh: number | null;
  readonly high: number | null;
  readonly low: number | null;
  readonly lowLow: number | null;
}

/** A measured quantity of the site. */
export interface Signal {
  readonly name: string;
  /** MQTT topic filter of its readings; null when the site is only fitted, not run. */
  readonly topic: string | null;
  readonly payload: PayloadReading;
  /** UCUM code; '1' where dimensionless. */
  readonly unit: string;
  /** UCUM code of what the payload holds, after scale and offset; null: `unit`. Histories hold `unit`. */
  readonly sentIn: string | null;
  /** The payload's number times this, plus `offset`. */
  readonly scale: number;
  readonly offset: number;
  /** The payload's number at which a counter begins at zero again; null: not known. */
  readonly wrapsAt: number | null;
  /** Smallest step of the sensor in `unit`; null: found in the history. */
  readonly resolution: number | null;
  /** Physically possible values in `unit`; readings outside are refused. */
  readonly range: readonly [number, number] | null;
  readonly aggregate: Aggregate;
  readonly limits: Limits;
  /** What it says of its own warnings; null: nothing beside the site's rule. */
  readonly warn: SignalWarn | null;
  /** Column of wide history files, or value of the signal column of long ones; the name unless said otherwise. */
  readonly column: string;
}

/** A known cause; its plan is its values ahead of now. */
export interface Input extends Signal {
  readonly planTopic: string | null;
}

/** What of the calendar the plant follows. */
export interface Calendar {
  readonly timeOfDay: boolean;
  readonly dayOfWeek: boolean;
  /** ISO dates, local to the site's time zone. */
  readonly holidays: readonly string[];
}

/** A checked site file, every default filled in. */
export interface Site {
  readonly site: string;
  readonly equipmentClass: string;
  /** IANA time zone: for people and calendar; also of history times that carry no zone when `historyZone` is null. */
  readonly timeZone: string;
  readonly tickMs: number;
  /** Furthest forecast step, in ticks. */
  readonly horizon: number;
  readonly latenessMs: number;
  /** First level of every topic of ours. */
  readonly root: string;
  readonly residualBytesPerDay: number;
  /** When warnings open and close, where a signal says nothing else; `warnRuleOf` has the rule of a limit. */
  readonly warn: WarnRule;
  readonly signals: readonly Signal[];
  readonly inputs: readonly Input[];
  readonly calendar: Calendar;
  /** Time that must not teach; for the trainer alone. */
  readonly exclude: readonly Exclusion[];
}

/** First topic level of ours unless the site file says otherwise. */
export const DEFAULT_ROOT = 'stillwell';
/** Residual bytes a day unless the site file says otherwise: under 3 MB a month, within the smallest metered plans. */
export const DEFAULT_RESIDUAL_BYTES_PER_DAY = 100_000;
/** Longest default lateness; field buses and local brokers deliver within it (common practice). */
const MOST_DEFAULT_LATENESS_MS = 10_000;

/** Of a signal whose payload holds its reading as it is. */
export const AS_SENT = Object.freeze({ sentIn: null, scale: 1, offset: 0, wrapsAt: null });

const NO_LIMITS: Limits = Object.freeze({ highHigh: null, high: null, low: null, lowLow: null });

type SignalEntry = SiteFile['signals'][number];

const toLimits = (limits: SignalEntry['limits']): Limits => {
  if (limits === undefined || limits === null) return NO_LIMITS;
  return {
    highHigh: limits.high_high ?? null,
    high: limits.high ?? null,
    low: limits.low ?? null,
    lowLow: limits.low_low ?? null,
  };
};

const toSignal = (entry: SignalEntry, aggregate: Aggregate, tickMs: number): Signal => ({
  name: entry.name,
  topic: entry.topic ?? null,
  payload: entry.payload ?? { kind: 'number' },
  unit: entry.unit ?? '1',
  sentIn: entry.sent_in ?? null,
  scale: entry.scale ?? 1,
  offset: entry.offset ?? 0,
  wrapsAt: entry.wraps_at ?? null,
  resolution: entry.resolution ?? null,
  range: entry.range ?? null,
  aggregate: entry.aggregate ?? aggregate,
  limits: toLimits(entry.limits),
  warn: toSignalWarn(entry.warn ?? null, tickMs),
  column: entry.column ?? entry.name,
});

const horizonOf = (file: SiteFile): number =>
  'ticks' in file.horizon ? file.horizon.ticks : file.horizon.ms / file.tick;

const toSite = (file: SiteFile): Site => ({
  site: file.site,
  equipmentClass: file.class ?? 'general',
  timeZone: file.time_zone,
  tickMs: file.tick,
  horizon: horizonOf(file),
  latenessMs: file.lateness ?? Math.min(Math.ceil(file.tick / 10), MOST_DEFAULT_LATENESS_MS),
  root: file.root ?? DEFAULT_ROOT,
  residualBytesPerDay: file.residual_budget ?? DEFAULT_RESIDUAL_BYTES_PER_DAY,
  warn: toWarnRule(file.warn ?? null, horizonOf(file), file.tick),
  signals: file.signals.map((entry) => toSignal(entry, 'mean', file.tick)),
  inputs: (file.inputs ?? []).map((entry) => ({
    ...toSignal(entry, 'last', file.tick),
    planTopic: entry.plan_topic ?? null,
  })),
  calendar: {
    timeOfDay: file.calendar?.time_of_day ?? true,
    dayOfWeek: file.calendar?.day_of_week ?? true,
    holidays: file.calendar?.holidays ?? [],
  },
  exclude: (file.exclude ?? []).map(toExclusion),
});

const SITE_FILE: YamlKind = {
  code: 'site-file',
  called: 'a site file',
  keys: 'site, time_zone, tick, horizon and signals',
  maxBytes: MAX_SITE_FILE_BYTES,
};

/**
 * Reads and checks a site file.
 *
 * units   durations come out in ms; limits, range and resolution in the signal's unit
 * throws  ProtocolError 'site-file': "file:line:col: path: expected …, got …", with a suggestion for a mistyped key
 */
export const parseSite = (text: string, fileName = 'site file'): Site => {
  const file = readYamlFile(text, fileName, SITE_FILE);
  const parsed = siteFileSchema.safeParse(file.plain);
  if (!parsed.success) throw file.refusal(listFaults(parsed.error, file.plain, siteFileKeys));
  const { signals, inputs, exclude } = parsed.data;
  const names = [...signals, ...(inputs ?? [])].map((entry) => entry.name);
  const misfits = excludeFaults(exclude ?? [], names);
  if (misfits.length > 0) throw file.refusal(misfits);
  const site = toSite(parsed.data);
  const faults = crossFaults(site);
  if (faults.length > 0) throw file.refusal(faults);
  return deepFreeze(site);
};
