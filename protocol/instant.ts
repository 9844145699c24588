/**
 * Moments as text: RFC 3339 (the internet profile of ISO 8601), always with a zone, and milliseconds since 1970 UTC.
 */

const INSTANT = /^(\d{4})-(\d\d)-(\d\d)[Tt ](\d\d):(\d\d):(\d\d)(?:[.,](\d{1,9}))?(?:([Zz])|([+-])(\d\d):?(\d\d))$/;

const isLeap = (year: number): boolean => (year % 4 === 0 && year % 100 !== 0) || year % 400 === 0;

const daysIn = (year: number, month: number): number =>
  [31, isLeap(year) ? 29 : 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31][month - 1] ?? 0;

/**
 * Milliseconds since 1970 UTC of "2026-03-01T12:00:00Z" or "…+01:00"; null for text without a zone or for a moment that
 * does not exist. Finer digits are cut. A leap second counts as the first moment of the next minute, as in UTC-based
 * millisecond counts.
 *
 * source  RFC 3339 section 5.6, 5.7
 */
export const parseInstant = (text: string): number | null => {
  const match = INSTANT.exec(text);
  if (match === null) return null;
  const [year, month, day, hour, minute, second] = match.slice(1, 7).map(Number) as [
    number,
    number,
    number,
    number,
    number,
    number,
  ];
  if (day < 1 || day > daysIn(year, month) || hour > 23 || minute > 59 || second > 60) return null;
  const zoneHours = Number(match[10] ?? 0);
  const zoneMinutes = Number(match[11] ?? 0);
  if (zoneHours > 23 || zoneMinutes > 59) return null;
  const offsetMs = (match[9] === '-' ? -1 : 1) * (zoneHours * 60 + zoneMinutes) * 60_000;
  // Date.UTC would read years 0 to 99 as 1900 to 1999.
  const date = new Date(0);
  date.setUTCFullYear(year, month - 1, day);
  date.setUTCHours(hour, minute, second, Number((match[7] ?? '').padEnd(3, '0').slice(0, 3)));
  return date.getTime() - offsetMs;
};

/**
 * "2026-03-01T12:00:00.000Z".
 *
 * units   ms since 1970 UTC, years 0 to 9999
 * throws  RangeError outside those years
 */
export const formatInstant = (timeMs: number): string => {
  const text = new Date(timeMs).toISOString();
  if (text.length !== 24) throw new RangeError(`expected a time in the years 0 to 9999, got ${timeMs} ms`);
  return text;
};
