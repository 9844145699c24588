/**
 * The site file's keys as they stand in YAML, each with what it may hold. Every message says what was expected and what
 * was got; where it stands is added by the parser, which has the lines.
 */
import { z } from 'zod';
import { checked } from './checked-value.ts';
import { parseDuration } from './duration.ts';
import { parseInstant } from './instant.ts';
import { showValue } from './issue.ts';
import { MAX_CHANNELS, MAX_HORIZON, MAX_SIGNALS, MAX_TICK_MS, MIN_TICK_MS } from './limits.ts';
import { isName, NAME_RULE } from './name.ts';
import { nearestName } from './nearest.ts';
import type { Aggregate } from './site.ts';
import { excludeEntrySchema, excludeSchema, whenSchema } from './site-exclude.ts';
import { PAYLOAD_KEYS, payloadSchema } from './site-payload.ts';
import { signalWarnSchema, warnSchema } from './site-warn.ts';
import { checkTopicFilter } from './topics.ts';

const isText = (value: unknown): value is string => typeof value === 'string';
const isNumber = (value: unknown): value is number => typeof value === 'number' && Number.isFinite(value);

const quoted = (rule: string) => (value: unknown) =>
  typeof value === 'number' || typeof value === 'boolean' ? `${rule} (in quotes if it looks like a number)` : rule;

const name = checked(quoted(NAME_RULE), (value) => (isText(value) && isName(value) ? value : undefined));

const duration = checked('a duration such as "10s", "1min" or "1h"', (value) =>
  isText(value) ? (parseDuration(value) ?? undefined) : undefined,
);

const tick = checked(`a duration from ${MIN_TICK_MS} ms to one day, such as "10s", "1min" or "1h"`, (value) => {
  const ms = isText(value) ? parseDuration(value) : null;
  return ms !== null && ms >= MIN_TICK_MS && ms <= MAX_TICK_MS ? ms : undefined;
});

/** Ticks as a number, or a duration in ms that the tick must divide. */
const horizon = checked<{ ticks: number } | { ms: number }>(
  `a whole number of ticks from 1 to ${MAX_HORIZON}, or a duration such as "6h"`,
  (value) => {
    if (isNumber(value))
      return Number.isInteger(value) && value >= 1 && value <= MAX_HORIZON ? { ticks: value } : undefined;
    const ms = isText(value) ? parseDuration(value) : null;
    return ms !== null && ms > 0 ? { ms } : undefined;
  },
);

const isTimeZone = (zone: string): boolean => {
  try {
    new Intl.DateTimeFormat('en', { timeZone: zone });
    return /^[A-Za-z]/.test(zone);
  } catch {
    return false;
  }
};

const timeZone = checked(
  (value) => {
    const near = isText(value) ? nearestName(value, Intl.supportedValuesOf('timeZone')) : null;
    return `an IANA time zone such as "Europe/Vienna" or "UTC"${near === null ? '' : ` (did you mean "${near}"?)`}`;
  },
  (value) => (isText(value) && isTimeZone(value) ? value : undefined),
);

/** A filter's own complaint is better than any general one. */
const topicFilter = z.unknown().transform((value, context): string => {
  const fail = (message: string): never => {
    context.addIssue({ code: 'custom', message });
    return z.NEVER;
  };
  if (!isText(value)) return fail(`expected an MQTT topic filter, got ${showValue(value)}`);
  if (value.startsWith('$share/'))
    return fail('expected a topic filter that every gateway gets in full, got a shared one');
  try {
    checkTopicFilter(value);
    return value;
  } catch (error) {
    return fail((error as Error).message);
  }
});

const root = checked('topic levels without wildcards, such as "stillwell" or "plant/forecasts"', (value) =>
  isText(value) && value.split('/').every(isName) ? value : undefined,
);

/** UCUM codes people most often get wrong, and what they mean. */
const UNIT_HINTS: Readonly<Record<string, string>> = {
  '°C': 'Cel',
  degC: 'Cel',
  C: 'Cel',
  '°F': '[degF]',
  'm³/h': 'm3/h',
  'm³': 'm3',
  'm²': 'm2',
  'l/s': 'L/s',
  '°': 'deg',
  µm: 'um',
  Ω: 'Ohm',
  '': '1',
};

const unit = checked(
  (value) => {
    const hint = isText(value) ? UNIT_HINTS[value] : isNumber(value) ? String(value) : undefined;
    return `a UCUM unit code in quotes if need be, without spaces${hint === undefined ? '' : ` (did you mean "${hint}"?)`}`;
  },
  (value) => {
    if (value === 1) return '1';
    return isText(value) && /^[!-~]{1,40}$/.test(value) && value !== 'degC' ? value : undefined;
  },
);

const number = checked('a number', (value) => (isNumber(value) ? value : undefined));
const scale = checked('a number other than 0', (value) => (isNumber(value) && value !== 0 ? value : undefined));
const positive = checked('a number above 0', (value) => (isNumber(value) && value > 0 ? value : undefined));
const byteCount = checked('a whole number of bytes a day, at least 1024', (value) =>
  Number.isSafeInteger(value) && (value as number) >= 1024 ? (value as number) : undefined,
);
const truth = checked('true or false', (value) => (typeof value === 'boolean' ? value : undefined));
const label = checked(quoted('text'), (value) => (isText(value) && value.length > 0 ? value : undefined));

const range = checked<readonly [number, number]>('two numbers [low, high] with low below high', (value) => {
  if (!Array.isArray(value) || value.length !== 2 || !value.every(isNumber)) return undefined;
  return value[0]! < value[1]! ? ([value[0]!, value[1]!] as const) : undefined;
});

const AGGREGATES: readonly Aggregate[] = ['last', 'mean', 'min', 'max', 'sum', 'increment'];
const aggregate = checked(
  (value) => {
    const near = isText(value) ? nearestName(value, AGGREGATES) : null;
    return `one of ${AGGREGATES.join(', ')}${near === null ? '' : ` (did you mean "${near}"?)`}`;
  },
  (value) => AGGREGATES.find((one) => one === value),
);

const isDate = (text: string): boolean => /^\d{4}-\d\d-\d\d$/.test(text) && parseInstant(`${text}T00:00:00Z`) !== null;
const holiday = checked('a date such as "2026-12-25"', (value) => (isText(value) && isDate(value) ? value : undefined));

const limits = z.strictObject({
  high_high: number.nullish(),
  high: number.nullish(),
  low: number.nullish(),
  low_low: number.nullish(),
});

const signalKeys = {
  name,
  topic: topicFilter.nullish(),
  payload: payloadSchema.nullish(),
  unit: unit.nullish(),
  sent_in: unit.nullish(),
  scale: scale.nullish(),
  offset: number.nullish(),
  wraps_at: positive.nullish(),
  resolution: positive.nullish(),
  range: range.nullish(),
  aggregate: aggregate.nullish(),
  limits: limits.nullish(),
  warn: signalWarnSchema.nullish(),
  column: label.nullish(),
};

/** One entry of `signals`. */
export const signalSchema = z.strictObject(signalKeys);
/** One entry of `inputs`. */
export const inputSchema = z.strictObject({ ...signalKeys, plan_topic: topicFilter.nullish() });
/** The map under `limits`. */
export const limitsSchema = limits;
/** The map under `calendar`. */
export const calendarSchema = z.strictObject({
  time_of_day: truth.nullish(),
  day_of_week: truth.nullish(),
  holidays: z.array(holiday).nullish(),
});

/** The whole site file. */
export const siteFileSchema = z.strictObject({
  site: name,
  class: name.nullish(),
  time_zone: timeZone,
  tick,
  horizon,
  lateness: duration.nullish(),
  root: root.nullish(),
  residual_budget: byteCount.nullish(),
  warn: warnSchema.nullish(),
  signals: z.array(signalSchema).min(1).max(MAX_SIGNALS),
  inputs: z.array(inputSchema).max(MAX_CHANNELS).nullish(),
  calendar: calendarSchema.nullish(),
  exclude: excludeSchema.nullish(),
});

/** A site file that passed its schema, before defaults. */
export type SiteFile = z.output<typeof siteFileSchema>;

/** Keys that the map at a path of the site file may have, for suggestions. */
export const siteFileKeys = (path: readonly PropertyKey[]): readonly string[] => {
  const [first, , third, fourth] = path;
  if (path.length === 0) return Object.keys(siteFileSchema.shape);
  if (first === 'calendar') return Object.keys(calendarSchema.shape);
  if (first === 'exclude') return Object.keys((third === 'when' ? whenSchema : excludeEntrySchema).shape);
  if (first === 'warn' || (third === 'warn' && fourth !== undefined)) return Object.keys(warnSchema.shape);
  if (third === 'warn') return Object.keys(signalWarnSchema.shape);
  if (third === 'limits') return Object.keys(limitsSchema.shape);
  if (third === 'payload') return PAYLOAD_KEYS;
  if (first === 'inputs') return Object.keys(inputSchema.shape);
  return first === 'signals' ? Object.keys(signalSchema.shape) : [];
};
