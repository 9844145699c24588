import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { formatDuration, parseDuration } from '../../protocol/duration.ts';
import { isName, toName } from '../../protocol/name.ts';
import { nearestName } from '../../protocol/nearest.ts';
import type { GoodRule } from '../../protocol/payload/good.ts';
import { type Input, type Limits, parseSite, type Signal, type Site } from '../../protocol/site.ts';
import type { Exclusion } from '../../protocol/site-exclude.ts';
import { formatSite } from '../../protocol/site-format.ts';
import type { SignalWarn, WarnWords } from '../../protocol/site-warn.ts';

const SEED = 20260308;
const record = <T>(model: { [K in keyof T]: fc.Arbitrary<T[K]> }) => fc.record<T>(model, { noNullPrototype: true });
const name = fc.string({ unit: 'grapheme', minLength: 1, maxLength: 12 }).map(toName);
const limits: fc.Arbitrary<Limits> = fc
  .tuple(
    fc.uniqueArray(fc.double({ min: -100, max: 100, noNaN: true }), { minLength: 4, maxLength: 4 }),
    fc.array(fc.boolean(), { minLength: 4, maxLength: 4 }),
  )
  .map(([levels, isSet]) => {
    const [lowLow, low, high, highHigh] = levels.sort((a, b) => a - b).map((value, i) => (isSet[i] ? value : null));
    return { highHigh: highHigh!, high: high!, low: low!, lowLow: lowLow! };
  });
const good = fc.constantFrom<GoodRule>(null, 'opc-ua', [192, 'good', null, true], ['yes', '12']);
const payload: fc.Arbitrary<Signal['payload']> = fc.oneof(
  fc.constant({ kind: 'number' as const }),
  record({
    kind: fc.constantFrom('json' as const, 'msgpack' as const),
    value: fc.constantFrom('', '/v', '/a~1b/0', '/ä "x"'),
    time: fc.constantFrom(null, '/t', ''),
    quality: fc.constant(null),
    good: fc.constant(null),
  }),
  record({
    kind: fc.constantFrom('json' as const, 'msgpack' as const),
    value: fc.constant('/v'),
    time: fc.constant(null),
    quality: fc.constantFrom('/q', ''),
    good,
  }),
);
/** Openings above closings whatever stands around them. */
const words: fc.Arbitrary<WarnWords> = record({
  open: fc.option(fc.double({ min: 0.6, max: 1, noNaN: true })),
  close: fc.option(fc.double({ min: 0.01, max: 0.3, noNaN: true })),
  hold: fc.option(fc.integer({ min: 1, max: 5000 })),
});
const limitNames = ['highHigh', 'high', 'low', 'lowLow'] as const;
const sparkplug: fc.Arbitrary<Signal['payload']> = record({
  kind: fc.constant('sparkplug' as const),
  metric: fc.constantFrom('Tank/Level', 'yes', '12', ' a: b '),
  good,
});
/** Topic and payload. */
const source = fc.oneof(
  fc.tuple(fc.option(fc.constantFrom('a/b', '+/x', 'plant/#', 'yes', '123', ' spaced out ', '#')), payload),
  fc.tuple(fc.constantFrom(null, 'spBv1.0/g/+/n', 'spBv1.0/group one/+/n/d'), sparkplug),
);
const units = fc.constantFrom<[string, string | null]>(
  ...(
    [
      ['1', null],
      ['Cel', '[degF]'],
      ['m3/h', 'L/s'],
      ['%', '1'],
      ['[degF]', null],
      ['kW.h', 'MJ'],
    ] as const
  ).map(([unit, sentIn]): [string, string | null] => [unit, sentIn]),
);
const factor = fc.double({ min: 1e-6, max: 1e6, noNaN: true });
const keys = record<Omit<Signal, 'topic' | 'payload' | 'unit' | 'sentIn'>>({
  name,
  scale: factor,
  offset: fc.double({ min: -1e6, max: 1e6, noNaN: true }).map((value) => value + 0),
  wrapsAt: fc.constantFrom(null, 65_536, 2 ** 53),
  resolution: fc.option(fc.double({ min: 1e-9, max: 10, noNaN: true })),
  range: fc.option(
    fc.tuple(fc.double({ min: -1e6, max: -100, noNaN: true }), fc.double({ min: 100, max: 1e6, noNaN: true })),
  ),
  aggregate: fc.constantFrom('last', 'mean', 'min', 'max', 'sum', 'increment'),
  limits,
  warn: fc.option(
    record<SignalWarn>({
      open: fc.constant(null),
      close: fc.option(fc.double({ min: 0.01, max: 0.3, noNaN: true })),
      hold: fc.option(fc.integer({ min: 1, max: 5000 })),
      limits: record({
        highHigh: fc.option(words),
        high: fc.option(words),
        low: fc.option(words),
        lowLow: fc.option(words),
      }),
    }),
  ),
  column: fc.string({ unit: 'grapheme', minLength: 1, maxLength: 12 }),
});
const signal: fc.Arbitrary<Signal> = fc.tuple(keys, source, units).map(([one, [topic, how], [unit, sentIn]]) => {
  const isCounter = one.aggregate === 'increment';
  return {
    ...one,
    topic,
    payload: how,
    unit,
    sentIn: isCounter && unit === 'Cel' ? null : sentIn,
    offset: isCounter ? 0 : one.offset,
    wrapsAt: isCounter ? one.wrapsAt : null,
  };
});
const input: fc.Arbitrary<Input> = fc
  .tuple(signal, fc.constantFrom(null, 'plan/x'))
  .map(([one, planTopic]) => ({ ...one, planTopic }));
/** Names of signals are put in later, once they are known. */
const reasoned = {
  reason: fc.string({ unit: 'grapheme', minLength: 1, maxLength: 20 }),
  signals: fc.constantFrom(null, []),
};
const exclusion: fc.Arbitrary<Exclusion> = fc.oneof(
  record({
    ...reasoned,
    fromMs: fc.integer({ min: 0, max: 2e12 }),
    toMs: fc.integer({ min: 2e12 + 1, max: 4e12 }),
  }),
  record({
    ...reasoned,
    when: record({
      signal: fc.constant(''),
      is: fc.constantFrom('above', 'below', 'equals'),
      level: fc.double({ min: -1e6, max: 1e6, noNaN: true }).map((level) => level + 0),
    }),
    beforeMs: fc.nat(1e7),
    afterMs: fc.nat(1e7),
  }),
);
/** Only limits that are set may be spoken of. */
const ofSet = (said: SignalWarn['limits'], levels: Limits): SignalWarn['limits'] =>
  Object.fromEntries(
    limitNames.map((limit) => [limit, levels[limit] === null ? null : said[limit]]),
  ) as SignalWarn['limits'];
const site: fc.Arbitrary<Site> = record({
  site: name,
  equipmentClass: name,
  timeZone: fc.constantFrom('UTC', 'Europe/Vienna', 'America/St_Johns'),
  tickMs: fc.integer({ min: 100, max: 86_400_000 }),
  horizon: fc.integer({ min: 1, max: 1024 }),
  latenessMs: fc.nat(600_000),
  root: fc.constantFrom('stillwell', 'a/b/c'),
  residualBytesPerDay: fc.integer({ min: 1024, max: 1e9 }),
  warn: record({
    open: fc.double({ min: 0.6, max: 1, noNaN: true }),
    close: fc.double({ min: 0.01, max: 0.3, noNaN: true }),
    hold: fc.integer({ min: 1, max: 5000 }),
  }),
  signals: fc.array(signal, { minLength: 1, maxLength: 4 }),
  inputs: fc.array(input, { maxLength: 2 }),
  calendar: record({
    timeOfDay: fc.boolean(),
    dayOfWeek: fc.boolean(),
    holidays: fc.subarray(['2026-01-01', '2026-12-25']),
  }),
  exclude: fc.array(exclusion, { maxLength: 3 }),
}).map((one) => {
  // Names, readings and plans must be distinct: number names and plans, keep a topic on the first channel alone.
  const own = <T extends Signal>(channel: T, i: number): T => ({
    ...channel,
    name: toName(`${Array.from(channel.name).slice(0, 5).join('')}_${i}`),
    topic: i === 0 ? channel.topic : null,
    warn: channel.warn === null ? null : { ...channel.warn, limits: ofSet(channel.warn.limits, channel.limits) },
  });
  const signals = one.signals.map(own);
  const { name } = signals[0]!;
  return {
    ...one,
    signals,
    inputs: one.inputs.map((channel, i) => ({
      ...own(channel, i + one.signals.length),
      planTopic: channel.planTopic === null ? null : `${channel.planTopic}${i}`,
    })),
    exclude: one.exclude.map((entry) => ({
      ...entry,
      signals: entry.signals === null ? null : [name],
      ...('when' in entry ? { when: { ...entry.when, signal: name } } : {}),
    })),
  };
});

describe('formatSite', () => {
  test('what it writes reads back to the same site, with or without comments', () => {
    fc.assert(
      fc.property(site, fc.string({ unit: 'grapheme' }), (one, comment) => {
        expect(parseSite(formatSite(one))).toStrictEqual(one);
        const comments = {
          '': comment,
          'signals[0].resolution': comment,
          'signals[0].range': comment,
          signals: comment,
          'signals[0].payload': comment,
          'calendar.holidays': comment,
          nowhere: comment,
        };
        expect(parseSite(formatSite(one, comments))).toStrictEqual(one);
      }),
      { seed: SEED, numRuns: 60 },
    );
  });

  test('comments stand beside their fields', () => {
    const one = parseSite(
      'site: a\ntime_zone: UTC\ntick: 10s\nhorizon: 6\nsignals:\n  - name: t\n    resolution: 0.1\n    range: [0, 9]\n',
    );
    const text = formatSite(one, {
      '': 'First file.\nCheck it.',
      'signals[0].resolution': 'found in the history',
      'signals[0].range': 'widest seen',
    });
    expect(text).toContain('# First file.\n# Check it.\n');
    expect(text).toContain('resolution: 0.1 # found in the history\n');
    expect(text).toContain('range: [0, 9] # widest seen\n');
  });
});

describe('durations', () => {
  test.each([
    ['10s', 10_000],
    ['1min', 60_000],
    ['1.5h', 5_400_000],
    ['0.1min', 6000],
    ['250ms', 250],
    ['1d', 86_400_000],
    ['15 min', 900_000],
  ])('%s', (text, ms) => expect(parseDuration(text)).toBe(ms));
  test.each([['1m'], ['min'], ['-1s'], ['1e3s'], ['0.0001s'], ['1h30min'], ['']])('%s is none', (text) =>
    expect(parseDuration(text)).toBeNull(),
  );
  test('written ones read back', () => {
    fc.assert(
      fc.property(fc.nat(1e9), (ms) => {
        expect(parseDuration(formatDuration(ms))).toBe(ms);
      }),
      { seed: SEED },
    );
    expect([0, 90_000, 3_600_000, 86_400_000].map(formatDuration)).toEqual(['0ms', '90s', '1h', '1d']);
  });
});

describe('names', () => {
  test('any label gives a name, and a name stays itself', () => {
    fc.assert(
      fc.property(fc.string({ unit: 'grapheme', maxLength: 90 }), (label) => {
        expect(isName(toName(label))).toBe(true);
        expect(toName(toName(label))).toBe(toName(label));
      }),
      { seed: SEED },
    );
  });
  test.each([
    ['Flow rate [m³/h]', 'Flow_rate_m_h'],
    ['T1', 'T1'],
    ['  Druck (bar) ', 'Druck_bar'],
    ['../../etc', 'etc'],
    ['a/b+c#', 'a_b_c'],
    ['!!!', 'unnamed'],
  ])('%s gives %s', (label, expected) => expect(toName(label)).toBe(expected));
  test.each([['a/b'], ['+'], ['#'], ['.hidden'], ['-x'], [''], ['a b'], ['$SYS'], ['a\u0308'], ['x'.repeat(65)]])(
    '%s is none',
    (text) => {
      expect(isName(text)).toBe(false);
    },
  );
});

describe('the nearest name', () => {
  const keys = ['resolution', 'range', 'topic', 'time_zone', 'high', 'high_high'];
  test.each([
    ['resoluton', 'resolution'],
    ['reslouiton', 'resolution'],
    ['timezone', 'time_zone'],
    ['TimeZone', 'time_zone'],
    ['topci', 'topic'],
    ['hihg', 'high'],
    ['highhigh', 'high_high'],
  ])('%s: %s', (typed, meant) => expect(nearestName(typed, keys)).toBe(meant));
  test.each([['delay'], ['colour'], ['x'], ['resolutely different']])('%s: none', (typed) =>
    expect(nearestName(typed, keys)).toBeNull(),
  );
});
