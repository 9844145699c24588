/** Which ticks and readings a site file excludes, and that a history so marked keeps the rest as it was. */
import { describe, expect, it } from 'vitest';
import { parseSite } from '../../protocol/index.ts';
import { believe, excludedFacts, excludedNotes, withoutExcluded } from '../../trainer/exclusions.ts';
import type { ChannelReadings, History } from '../../trainer/history/history.ts';
import { prepare } from '../../trainer/history/load.ts';
import { layOnTicks } from '../../trainer/history/ticks.ts';

const MINUTE = 60_000;
const START = Date.UTC(2026, 2, 1);

const siteWith = (...entries: string[]) =>
  parseSite(
    `site: a\ntime_zone: UTC\ntick: 10min\nhorizon: 4\nsignals: [{name: level}, {name: flow}]\ninputs: [{name: service}]\n${
      entries.length === 0 ? '' : `exclude:\n${entries.map((entry) => `  - ${entry}\n`).join('')}`
    }`,
  );

/** Two hours of readings a minute; `service` as given by minute. */
function history(service: Readonly<Record<number, number>>): History {
  const minutes = Array.from({ length: 120 }, (_, n) => START + n * MINUTE);
  const rows = Object.entries(service);
  const of = (name: string, times: readonly number[], values: readonly number[]): ChannelReadings => ({
    name,
    times: Float64Array.from(times),
    values: Float64Array.from(values),
  });
  return {
    channels: [
      of(
        'level',
        minutes,
        minutes.map((_, n) => n / 10),
      ),
      of(
        'flow',
        minutes,
        minutes.map((_, n) => 50 + n / 10),
      ),
      of(
        'service',
        rows.map(([minute]) => START + Number(minute) * MINUTE),
        rows.map(([, value]) => value),
      ),
    ],
    signalCount: 2,
    files: [],
    zone: null,
    clockChanges: [],
  };
}

const excludedTicks = (entry: string, service: Readonly<Record<number, number>> = { 0: 0, 119: 0 }): number[] => {
  const { excluded } = prepare(history(service), siteWith(entry)).series;
  return [...excluded!.isExcluded].flatMap((flag, t) => (flag === 1 ? [t] : []));
};

describe('ticks of the whole plant', () => {
  it.each([
    ['{from: 2026-03-01T00:20:00Z, to: 2026-03-01T00:40:00Z, reason: x}', [2, 3]],
    ['{from: 2026-03-01T00:29:59Z, to: 2026-03-01T00:30:01Z, reason: x}', [2, 3]],
    ['{from: 2025-01-01T00:00:00Z, to: 2026-03-01T00:10:00Z, reason: x}', [0]],
    ['{from: 2026-03-01T01:50:00Z, to: 2027-03-01T00:10:00Z, reason: x}', [11]],
    ['{from: 2027-01-01T00:00:00Z, to: 2027-03-01T00:10:00Z, reason: x}', []],
  ])('%s', (entry, ticks) => {
    expect(excludedTicks(entry)).toEqual(ticks);
  });

  it.each([
    ['above: 0.5', { 0: 0, 25: 1, 40: 0 }, [2, 3]],
    ['equals: 2', { 0: 0, 25: 1, 31: 2, 32: 1 }, [3]],
    ['below: 1', { 0: 1, 60: 0.5, 62: 0, 65: 1 }, [6]],
    // Holds to the end where nothing says otherwise; says nothing before its first reading.
    ['above: 0.5', { 95: 1 }, [9, 10, 11]],
    ['above: 0.5', { 0: 0, 25: Number.NaN, 30: 0 }, []],
    ['above: 0.5', { 0: 0, 25: 1, 30: Number.NaN, 40: 0 }, [2, 3]],
  ])('while service is %s of %j', (when, service, ticks) => {
    expect(excludedTicks(`{when: {signal: service, ${when}}, reason: x}`, service)).toEqual(ticks);
  });

  it('with a margin before and after, which may join two stretches', () => {
    const service = { 0: 0, 30: 1, 31: 0, 50: 1, 51: 0 };
    const entry = (margins: string): string => `{when: {signal: service, equals: 1}, ${margins} reason: x}`;
    expect(excludedTicks(entry(''), service)).toEqual([3, 5]);
    expect(excludedTicks(entry('before: 10min,'), service)).toEqual([2, 3, 4, 5]);
    expect(excludedTicks(entry('after: 25min,'), service)).toEqual([3, 4, 5, 6, 7]);
    const { excluded } = prepare(history(service), siteWith(entry('after: 25min,'))).series;
    expect(excluded!.entries[0]).toMatchObject({ stretches: 1, ticks: 5 });
  });

  it('leaves the readings where they are, but for those who learn', () => {
    const span = '{from: 2026-03-01T00:20:00Z, to: 2026-03-01T00:40:00Z, reason: x}';
    const plain = prepare(history({ 0: 0 }), siteWith()).series;
    const { series } = prepare(history({ 0: 0 }), siteWith(span));
    expect(plain.excluded).toBeUndefined();
    expect(withoutExcluded(plain)).toBe(plain);
    expect(series.values).toEqual(plain.values);
    expect([...withoutExcluded(series).values[1]!].map(Number.isNaN)).toEqual(
      Array.from({ length: 12 }, (_, t) => t === 2 || t === 3),
    );
  });
});

describe('signals by name', () => {
  const faulty = '{from: 2026-03-01T00:25:00Z, to: 2026-03-01T00:45:00Z, signals: [flow], reason: fouled}';

  it('are missing to everyone, other signals untouched, no tick marked', () => {
    const plain = prepare(history({ 0: 0 }), siteWith()).series;
    const { series } = prepare(history({ 0: 0 }), siteWith(faulty));
    expect(series.values[0]).toEqual(plain.values[0]);
    expect([...series.values[1]!].map(Number.isNaN)).toEqual(Array.from({ length: 12 }, (_, t) => t >= 2 && t <= 4));
    expect(series.excluded!.isExcluded.includes(1)).toBe(false);
  });

  it('and no lattice or range is found from what they say', () => {
    const bad = history({ 0: 0 });
    for (let n = 25; n < 45; n++) (bad.channels[1]!.values as Float64Array)[n] = 1e9 + n / 1e6;
    const good = prepare(history({ 0: 0 }), siteWith(faulty));
    const other = prepare(bad, siteWith(faulty));
    expect(other.lattices).toEqual(good.lattices);
    expect(other.series).toEqual(good.series);
  });

  it('take no increment from a counter across what was taken out', () => {
    const site = parseSite(
      'site: a\ntime_zone: UTC\ntick: 10min\nhorizon: 4\nsignals: [{name: count, aggregate: increment}]\n' +
        'exclude: [{from: 2026-03-01T00:20:00Z, to: 2026-03-01T00:40:00Z, signals: [count], reason: x}]\n',
    );
    const times = Float64Array.from({ length: 12 }, (_, n) => START + n * 10 * MINUTE);
    const values = Float64Array.from(times, (_, n) => (n === 2 || n === 3 ? 5 : 1000 + n));
    const one: History = { ...history({}), channels: [{ name: 'count', times, values }], signalCount: 1 };
    const [laid] = prepare(one, site).series.values;
    expect([...laid!].filter((value) => !Number.isNaN(value))).toEqual(new Array(8).fill(1));
  });

  it('are taken out of a series laid from elsewhere as well', () => {
    const site = siteWith(faulty);
    const laid = layOnTicks(history({ 0: 0 }), site);
    const marked = believe(history({ 0: 0 }), site).mark(laid);
    expect([...marked.values[1]!].flatMap((value, t) => (Number.isNaN(value) ? [t] : []))).toEqual([2, 3, 4]);
    expect([...laid.values[1]!].some(Number.isNaN)).toBe(false);
  });
});

describe('what is said of it', () => {
  it('names who, how much, why and where', () => {
    const site = siteWith(
      '{from: 2026-03-01T00:20:00Z, to: 2026-03-01T00:40:00Z, reason: new impeller}',
      '{from: 2026-03-01T00:25:00Z, to: 2026-03-01T00:45:00Z, signals: [flow], reason: fouled}',
      '{from: 2027-01-01T00:00:00Z, to: 2027-03-01T00:10:00Z, reason: later}',
    );
    const { series } = prepare(history({ 0: 0 }), site);
    expect(excludedNotes(series)).toEqual([
      'The whole plant: 20 min (16.7 %) excluded from learning, bounds and judging for "new impeller", 2026-03-01T00:20:00Z to 2026-03-01T00:40:00Z.',
      'flow: 30 min (25.0 %) excluded from learning, bounds and judging for "fouled", 2026-03-01T00:20:00Z to 2026-03-01T00:50:00Z.',
      'The whole plant: nothing excluded for "later", which lies outside this history.',
    ]);
    expect(excludedFacts(series)).toEqual({
      excluded: { entries: 3, plantTicks: 2, ticksByReason: { 'new impeller': 2, fouled: 3, later: 0 } },
    });
    expect(excludedFacts(prepare(history({ 0: 0 }), siteWith()).series)).toEqual({});
  });

  it('stays short in the provenance, whatever the site file holds', () => {
    const entries = Array.from(
      { length: 300 },
      (_, n) => `{from: 2026-03-01T00:20:00Z, to: 2026-03-01T00:40:00Z, reason: "${n} ${'é'.repeat(500)}"}`,
    );
    const { series } = prepare(history({ 0: 0 }), siteWith(...entries));
    expect(JSON.stringify(excludedFacts(series)).length).toBeLessThan(1000);
  });
});
