/**
 * RFC 3339 (Klyne, Newman, 2002): section 5.8 examples and the rules of 5.6 and 5.7, from memory. Milliseconds beside
 * them are from the language's own Date, a second route, or, where marked, from POSIX `date -u +%s`.
 */
import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { formatInstant, parseInstant } from '../../protocol/instant.ts';

describe('RFC 3339', () => {
  test.each([
    ['1985-04-12T23:20:50.52Z', Date.UTC(1985, 3, 12, 23, 20, 50, 520)],
    ['1996-12-19T16:39:57-08:00', Date.UTC(1996, 11, 20, 0, 39, 57)],
    ['1990-12-31T23:59:60Z', Date.UTC(1991, 0, 1)],
    ['1990-12-31T15:59:60-08:00', Date.UTC(1991, 0, 1)],
    ['1937-01-01T12:00:27.87+00:20', Date.UTC(1937, 0, 1, 11, 40, 27, 870)],
  ])('section 5.8: %s', (text, ms) => expect(parseInstant(text)).toBe(ms));

  test.each([
    ['1970-01-01T00:00:00Z', 0],
    // POSIX: the billionth second.
    ['2001-09-09T01:46:40Z', 1_000_000_000_000],
    ['2000-02-29T00:00:00+00:00', Date.UTC(2000, 1, 29)],
    ['2026-03-29 01:00:00+0100', Date.UTC(2026, 2, 29)],
    ['2026-03-29t01:00:00z', Date.UTC(2026, 2, 29, 1)],
    ['2026-01-01T00:00:00.123456789Z', Date.UTC(2026, 0, 1) + 123],
    ['0001-01-01T00:00:00Z', Date.parse('0001-01-01T00:00:00Z')],
  ])('%s', (text, ms) => expect(parseInstant(text)).toBe(ms));

  test.each([
    ['without a zone', '2026-03-01T12:00:00'],
    ['a date alone', '2026-03-01'],
    ['29 February in a common year', '2026-02-29T00:00:00Z'],
    ['29 February 1900', '1900-02-29T00:00:00Z'],
    ['31 April', '2026-04-31T00:00:00Z'],
    ['month 13', '2026-13-01T00:00:00Z'],
    ['day 0', '2026-01-00T00:00:00Z'],
    ['hour 24', '2026-01-01T24:00:00Z'],
    ['minute 60', '2026-01-01T00:60:00Z'],
    ['second 61', '2026-01-01T00:00:61Z'],
    ['zone hour 24', '2026-01-01T00:00:00+24:00'],
    ['words behind', '2026-01-01T00:00:00Z and more'],
    ['two digits of year', '26-01-01T00:00:00Z'],
    ['nothing', ''],
  ])('%s is no moment', (_, text) => expect(parseInstant(text)).toBeNull());

  test('written moments read back, and as the language reads them', () => {
    fc.assert(
      fc.property(fc.integer({ min: -62_135_596_800_000, max: 253_402_300_799_999 }), (ms) => {
        expect(parseInstant(formatInstant(ms))).toBe(ms);
        expect(Date.parse(formatInstant(ms))).toBe(ms);
      }),
      { seed: 20260307 },
    );
    expect(() => formatInstant(253_402_300_800_000)).toThrow(/years 0 to 9999/);
    expect(() => formatInstant(Number.NaN)).toThrow(RangeError);
  });
});
