/**
 * Times against published facts. RFC 3339 (2002), section 5.8 examples. Clock changes: IANA time zone database, rules EU
 * and US (last Sunday of March and October at 01:00 UTC; second Sunday of March and first of November at 02:00 local), 2024.
 */
import { describe, expect, it } from 'vitest';
import { TimeReader } from '../../../trainer/history/times.ts';
import { fixedZoneName, ZoneRules } from '../../../trainer/history/zone.ts';

const NEVER = Number.NEGATIVE_INFINITY;
const read = (text: string, zone: string | null = null): string =>
  new Date(new TimeReader(zone).readText(text, NEVER)).toISOString();

describe('RFC 3339 section 5.8', () => {
  it.each([
    ['1985-04-12T23:20:50.52Z', '1985-04-12T23:20:50.520Z'],
    ['1996-12-19T16:39:57-08:00', '1996-12-20T00:39:57.000Z'],
    // Leap seconds: the same instant as the second after, on the POSIX axis.
    ['1990-12-31T23:59:60Z', '1991-01-01T00:00:00.000Z'],
    ['1990-12-31T15:59:60-08:00', '1991-01-01T00:00:00.000Z'],
    // Standard time of the Netherlands was 19 minutes and 32.13 seconds ahead of UTC; the RFC writes +00:20.
    ['1937-01-01T12:00:27.87+00:20', '1937-01-01T11:40:27.870Z'],
  ])('%s', (text, expected) => expect(read(text)).toBe(expected));
});

describe('other ways to write the same instant', () => {
  it.each([
    '2024-01-02 03:04:05Z',
    '2024-01-02t03:04:05z',
    '2024-01-02T05:04:05+02',
    '2024-01-02T05:04:05+0200',
    '2024-01-02T03:04:05.000 Z',
    '2024-01-02T03:04:05,000Z',
    '1704164645',
    '1704164645000',
    '1704164645.0',
  ])('%s', (text) => expect(read(text)).toBe('2024-01-02T03:04:05.000Z'));
});

describe('clock changes of 2024', () => {
  it.each([
    ['Europe/London', ['2024-03-31T01:00:00.000Z', '2024-10-27T01:00:00.000Z']],
    ['Europe/Vienna', ['2024-03-31T01:00:00.000Z', '2024-10-27T01:00:00.000Z']],
    ['America/New_York', ['2024-03-10T07:00:00.000Z', '2024-11-03T06:00:00.000Z']],
    ['Asia/Kolkata', []],
  ])('%s', (zone, expected) => {
    const found = new ZoneRules(zone).changes.filter((ms) => new Date(ms).getUTCFullYear() === 2024);
    expect(found.map((ms) => new Date(ms).toISOString())).toEqual(expected);
  });
  it('resolves local times on both sides of a change', () => {
    expect(read('2024-03-31T00:59:59', 'Europe/London')).toBe('2024-03-31T00:59:59.000Z');
    expect(read('2024-03-31T02:00:00', 'Europe/London')).toBe('2024-03-31T01:00:00.000Z');
    expect(read('2024-11-03T00:59:00', 'America/New_York')).toBe('2024-11-03T04:59:00.000Z');
    expect(read('2024-11-03T02:00:00', 'America/New_York')).toBe('2024-11-03T07:00:00.000Z');
    expect(read('2024-07-01', 'Europe/London')).toBe('2024-06-30T23:00:00.000Z');
    expect(read('2024-07-01T00:00:00', '+05:30')).toBe('2024-06-30T18:30:00.000Z');
  });
  it('tells the two passes of a doubled hour by the order of rows, forwards and newest first', () => {
    const local = [
      '2024-10-27T00:30',
      '2024-10-27T01:00',
      '2024-10-27T01:30',
      '2024-10-27T01:00',
      '2024-10-27T01:30',
      '2024-10-27T02:00',
    ];
    const utc = [-30, 0, 30, 60, 90, 120].map((minutes) => Date.UTC(2024, 9, 27, 0, minutes));
    const pass = (rows: readonly string[]): { times: number[]; reader: TimeReader } => {
      const reader = new TimeReader('Europe/London');
      const times: number[] = [];
      for (const row of rows) times.push(reader.readText(row, times.at(-1) ?? NEVER));
      return { times, reader };
    };
    const forwards = pass(local);
    expect(forwards.times).toEqual(utc);
    expect(forwards.reader.changes).toEqual([
      {
        atMs: Date.UTC(2024, 9, 27, 1),
        kind: 'doubled',
        spanMs: 3_600_000,
        offsetBefore: '+01:00',
        first: 2,
        second: 2,
      },
    ]);
    expect(pass(['2024-10-27T02:30', ...local.toReversed()]).times.slice(1)).toEqual(utc.toReversed());
  });
  it('tells them apart in an hourly file, where the doubled hour is one repeated time', () => {
    const reader = new TimeReader('Europe/London');
    const first = reader.readText('2024-10-27T01:00', Date.UTC(2024, 9, 26, 23));
    expect(first).toBe(Date.UTC(2024, 9, 27, 0));
    expect(reader.readText('2024-10-27T01:00', first)).toBe(Date.UTC(2024, 9, 27, 1));
  });
  it('flags times in a skipped hour and reads them with the offset before it', () => {
    const reader = new TimeReader('America/New_York');
    expect(reader.readText('2024-03-10T02:30', NEVER)).toBe(Date.UTC(2024, 2, 10, 7, 30));
    expect(reader.changes).toMatchObject([{ kind: 'skipped', first: 1, offsetBefore: '-05:00' }]);
  });
  it('names fixed offsets as the database does, whose sign counts westwards', () => {
    expect(fixedZoneName('+02:00')).toBe('Etc/GMT-2');
    expect(new ZoneRules('Etc/GMT-2').offsetAt(0)).toBe(new ZoneRules('+02:00').offsetAt(0));
  });
});
