/** Tables and numbers for a terminal. */

/** Columns padded to their widest cell; columns named in `right` (by index) are set flush right. */
export function textTable(
  head: readonly string[],
  rows: readonly (readonly string[])[],
  right: readonly number[] = [],
  indent = '  ',
): string {
  const widths = head.map((cell, i) => Math.max(cell.length, ...rows.map((row) => (row[i] ?? '').length)));
  const line = (row: readonly string[]): string =>
    (
      indent +
      row.map((cell, i) => (right.includes(i) ? cell.padStart(widths[i]!) : cell.padEnd(widths[i]!))).join('  ')
    ).trimEnd();
  return [line(head), line(widths.map((width) => '-'.repeat(width))), ...rows.map(line)].join('\n');
}

/** Up to `digits` significant digits, a dash where there is no number. */
export function shortNumber(value: number | null | undefined, digits = 4): string {
  if (value === null || value === undefined || !Number.isFinite(value)) return '-';
  return String(Number(value.toPrecision(digits)));
}

/** Furthest moment from 1970 that a date can hold (ECMA-262, time values). */
const MOST_MS = 8.64e15;

/** A moment in UTC to the second; one outside the calendar, as a damaged clock may give, is said to be so. */
export function momentText(ms: number | null): string {
  if (ms === null) return '-';
  return Math.abs(ms) <= MOST_MS ? `${new Date(ms).toISOString().slice(0, 19)}Z` : 'outside the calendar';
}

/** Text of others on one line of a terminal: control characters, which could redraw it, become a question mark. */
export function printable(text: string): string {
  return text.replace(/\p{Cc}/gu, '?');
}

/** A span of time in the largest unit that keeps it readable. */
export function spanText(ms: number): string {
  const units = [
    [86_400_000, 'd'],
    [3_600_000, 'h'],
    [60_000, 'min'],
    [1000, 's'],
  ] as const;
  for (const [size, unit] of units) if (Math.abs(ms) >= size) return `${Number((ms / size).toFixed(1))} ${unit}`;
  return `${Math.round(ms)} ms`;
}

/** Bytes as people read them. */
export function bytesText(bytes: number): string {
  if (bytes < 1024) return `${bytes} B`;
  if (bytes < 1024 * 1024) return `${(bytes / 1024).toFixed(1)} KiB`;
  return `${(bytes / 1024 / 1024).toFixed(1)} MiB`;
}
