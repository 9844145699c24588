/**
 * Lengths of time as people write them in a site file: a number and a unit, "10s", "1min", "1.5h".
 */

const UNIT_MS: Readonly<Record<string, number>> = { ms: 1, s: 1000, min: 60_000, h: 3_600_000, d: 86_400_000 };

/** Milliseconds of "10s", "1min", "1.5h"; null for other text or for what is no whole number of milliseconds. */
export const parseDuration = (text: string): number | null => {
  const match = /^(\d+(?:\.\d+)?) ?(ms|s|min|h|d)$/.exec(text.trim());
  if (match === null) return null;
  const ms = Number(match[1]) * UNIT_MS[match[2]!]!;
  // Decimal fractions of a unit are not exact in binary: 0.1 min is 6000.000…1 ms.
  const whole = Math.round(ms);
  return Math.abs(ms - whole) < 1e-6 && Number.isSafeInteger(whole) ? whole : null;
};

/** The shortest exact text: "90s", "1min", "1h", "1d". */
export const formatDuration = (ms: number): string => {
  const unit = ['d', 'h', 'min', 's'].find((name) => ms > 0 && ms % UNIT_MS[name]! === 0) ?? 'ms';
  return `${ms / UNIT_MS[unit]!}${unit}`;
};
