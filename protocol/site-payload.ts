/** The key `payload` of a signal: how a reading is taken out of a message. */
import { z } from 'zod';
import { showValue } from './issue.ts';
import type { GoodRule, GoodValue } from './payload/good.ts';
import { isPointer } from './pointer.ts';

/** How a reading is taken out of an MQTT payload; pointers are RFC 6901, times ISO 8601 with zone or ms since 1970. */
export type PayloadReading =
  | { readonly kind: 'number' }
  | {
      readonly kind: 'json' | 'msgpack';
      readonly value: string;
      readonly time: string | null;
      readonly quality: string | null;
      readonly good: GoodRule;
    }
  | { readonly kind: 'sparkplug'; readonly metric: string; readonly good: GoodRule };

/** A value in a document, with its time or without, and no word on its quality. */
export const documentPayload = (
  kind: 'json' | 'msgpack',
  value: string,
  time: string | null = null,
): Extract<PayloadReading, { kind: 'json' | 'msgpack' }> => ({ kind, value, time, quality: null, good: null });

/** Keys of a payload map. */
export const PAYLOAD_KEYS: readonly string[] = ['json', 'msgpack', 'time', 'quality', 'good', 'sparkplug'];
const KINDS = ['json', 'msgpack', 'sparkplug'] as const;
const MOST_GOOD_VALUES = 64;

type Fail = (key: string, message: string) => void;
type Given = Readonly<Record<string, unknown>>;

const isGiven = (map: Given, key: string): boolean => map[key] !== undefined && map[key] !== null;

const pointer = (map: Given, key: string, fail: Fail): string => {
  const value = map[key];
  if (typeof value === 'string' && isPointer(value)) return value;
  const isPath = typeof value === 'string' && value !== '' && !value.startsWith('/');
  const hint = isPath ? ` (did you mean "/${value.replace(/\./g, '/')}"?)` : '';
  fail(key, `expected a JSON pointer such as "/value" or "" for the whole payload${hint}, got ${showValue(value)}`);
  return '';
};

const isGoodValue = (value: unknown): value is GoodValue =>
  value === null || ['string', 'boolean'].includes(typeof value) || Number.isFinite(value);

const good = (map: Given, fail: Fail): GoodRule => {
  const value = map.good;
  if (!isGiven(map, 'good')) return null;
  if (value === 'opc-ua') return value;
  const isList = Array.isArray(value) && value.length > 0 && value.length <= MOST_GOOD_VALUES;
  if (isList && value.every(isGoodValue)) return value;
  const isBare = !Array.isArray(value) && isGoodValue(value);
  const hint = isBare ? ` (did you mean [${JSON.stringify(value)}]?)` : '';
  fail(
    'good',
    `expected a list of the values that count as good, such as [192, "good"], or opc-ua${hint}, got ${showValue(value)}`,
  );
  return null;
};

const sparkplug = (map: Given, fail: Fail): PayloadReading => {
  const { sparkplug: metric } = map;
  if (isGiven(map, 'time')) fail('time', 'expected no time beside sparkplug, whose metrics carry their own, got one');
  if (isGiven(map, 'quality'))
    fail('quality', 'expected no quality beside sparkplug, whose property Quality is always read, got one');
  const isName = typeof metric === 'string' && metric.length > 0;
  if (!isName) fail('sparkplug', `expected a metric's name such as "Tank/Level", got ${showValue(metric)}`);
  return { kind: 'sparkplug', metric: isName ? metric : '', good: good(map, fail) };
};

const document = (kind: 'json' | 'msgpack', map: Given, fail: Fail): PayloadReading => {
  const optional = (key: string) => (isGiven(map, key) ? pointer(map, key, fail) : null);
  const quality = optional('quality');
  if (quality === null && isGiven(map, 'good'))
    fail('good', 'expected good only beside quality, the pointer to what a sender says of a value, got good alone');
  return { kind, value: pointer(map, kind, fail), time: optional('time'), quality, good: good(map, fail) };
};

/** The schema of the key. */
export const payloadSchema = z.unknown().transform((value, context): PayloadReading => {
  if (value === 'number') return { kind: 'number' };
  const custom = (message: string, path: PropertyKey[] = []) => context.addIssue({ code: 'custom', message, path });
  if (typeof value !== 'object' || value === null || Array.isArray(value)) {
    const forms = 'number, {json: "/pointer"}, {msgpack: "/pointer"} or {sparkplug: "metric"}';
    custom(`expected ${forms}, got ${showValue(value)}`);
    return z.NEVER;
  }
  const map = value as Given;
  const strange = Object.keys(map).filter((key) => !PAYLOAD_KEYS.includes(key));
  if (strange.length > 0) context.addIssue({ code: 'unrecognized_keys', keys: strange, input: map });
  const kinds = KINDS.filter((key) => map[key] !== undefined);
  if (kinds.length !== 1) {
    const got = kinds.length === 0 ? 'none of them' : kinds.join(' and ');
    custom(`expected one of the keys json, msgpack and sparkplug, got ${got}`);
    return z.NEVER;
  }
  const fail: Fail = (key, message) => custom(message, [key]);
  return kinds[0] === 'sparkplug' ? sparkplug(map, fail) : document(kinds[0]!, map, fail);
});

const plainGood = (rule: GoodRule) => (rule === null ? {} : { good: rule });

/** As it stands in a site file. */
export const plainPayload = (how: PayloadReading): unknown => {
  if (how.kind === 'number') return 'number';
  if (how.kind === 'sparkplug') return { sparkplug: how.metric, ...plainGood(how.good) };
  return {
    [how.kind]: how.value,
    ...(how.time === null ? {} : { time: how.time }),
    ...(how.quality === null ? {} : { quality: how.quality }),
    ...plainGood(how.good),
  };
};
