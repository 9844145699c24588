/** Numbers, times and letters as people read them. */

/** Between a number and its unit: they stay on one line. */
const GLUE = '\u00a0';
const MINUTE = 60;
const HOUR = 60 * MINUTE;
const DAY = 24 * HOUR;

/** A span in its two largest units at most. */
export function spanText(seconds: number): string {
  if (!Number.isFinite(seconds)) return '–';
  const s = Math.max(0, Math.round(seconds));
  if (s < 1) return `${Math.round(Math.max(0, seconds) * 1000)}${GLUE}ms`;
  if (s < 90) return `${s}${GLUE}s`;
  if (s < 90 * MINUTE) return `${Math.round(s / MINUTE)}${GLUE}min`;
  if (s < 2 * DAY) return joined(Math.floor(s / HOUR), 'h', Math.round((s % HOUR) / MINUTE), 'min', 60);
  return joined(Math.floor(s / DAY), 'd', Math.round((s % DAY) / HOUR), 'h', 24);
}

function joined(large: number, largeUnit: string, small: number, smallUnit: string, most: number): string {
  if (small === most) return `${large + 1}${GLUE}${largeUnit}`;
  return small === 0 ? `${large}${GLUE}${largeUnit}` : `${large}${GLUE}${largeUnit} ${small}${GLUE}${smallUnit}`;
}

/** How long ago; below two seconds nobody needs the number. */
export function agoText(seconds: number): string {
  return seconds < 2 ? 'just now' : `${spanText(seconds)} ago`;
}

/** A number with the decimals its sensor has; four digits where that is not known. */
export function numberText(value: number | null | undefined, decimals: number | null): string {
  if (value === null || value === undefined || !Number.isFinite(value)) return '–';
  const text = decimals === null ? String(Number(value.toPrecision(4))) : value.toFixed(decimals);
  // A typographic minus is as wide as a plus, and does not break from its number.
  return text.replace('-', '\u2212');
}

/** Two bounds. */
export function rangeText(lower: number | undefined, upper: number | undefined, decimals: number | null): string {
  return `${numberText(lower, decimals)} to ${numberText(upper, decimals)}`;
}

const UNITS: Readonly<Record<string, string>> = {
  '1': '',
  Cel: '°C',
  '[degF]': '°F',
  Ohm: 'Ω',
  deg: '°',
  '[in_i]': 'in',
};
const RAISED: Readonly<Record<string, string>> = { '2': '²', '3': '³' };

/** A UCUM code as it is written on paper. */
export function unitText(unit: string): string {
  return UNITS[unit] ?? unit.replace(/([A-Za-z])([23])(?=$|[/.])/g, (_, base, power) => `${base}${RAISED[power]}`);
}

/** A value with its unit behind, where there is one. */
export function withUnit(text: string, unit: string): string {
  const shown = unitText(unit);
  return shown === '' ? text : `${text}${GLUE}${shown}`;
}

/** A probability, without false precision at its ends. */
export function chanceText(probability: number): string {
  if (probability < 0.01) return `below 1${GLUE}%`;
  if (probability > 0.99) return `above 99${GLUE}%`;
  return `${Math.round(probability * 100)}${GLUE}%`;
}

/** Bytes in units of a thousand. */
export function bytesText(bytes: number): string {
  if (bytes < 1000) return `${bytes}${GLUE}B`;
  const [size, unit] = bytes < 1e6 ? [bytes / 1e3, 'kB'] : bytes < 1e9 ? [bytes / 1e6, 'MB'] : [bytes / 1e9, 'GB'];
  return `${size < 10 ? size.toFixed(1) : Math.round(size)}${GLUE}${unit}`;
}

const LETTERS: Readonly<Record<string, string>> = {
  F: 'failure',
  C: 'function check',
  S: 'out of specification',
  M: 'maintenance required',
};

/** What a status letter stands for in NAMUR NE 107. */
export function letterWord(letter: string): string {
  return LETTERS[letter] ?? '';
}

/** A limit's name as people write it. */
export function limitWord(limit: string): string {
  return limit.replace('_', '-');
}

/** A reason without the signal's name before it, where it stands under that name. */
export function withoutName(reason: string, signal: string): string {
  const prefix = `${signal}: `;
  const text = reason.startsWith(prefix) ? reason.slice(prefix.length) : reason;
  return text.charAt(0).toUpperCase() + text.slice(1);
}

/** One or many of something. */
export function counted(n: number, one: string, many: string): string {
  return `${n} ${n === 1 ? one : many}`;
}
