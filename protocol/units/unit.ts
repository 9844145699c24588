/**
 * Reads UCUM codes and converts between them. Values are kept as a quotient of two numbers rather than one, so that
 * conversions people know by heart come out exactly: 212 [degF] is 100 Cel, 1000 kPa is 10 bar.
 */
import { BASE_UNITS, METRIC_UNITS, OTHER_UNITS, PREFIX_POWERS, TEMPERATURES } from './table.ts';

/** A unit, as multiples of the base units. */
interface Unit {
  readonly num: number;
  readonly den: number;
  /** Exponents of BASE_UNITS. */
  readonly dimension: readonly number[];
  /** Added before multiplying; 0 but for temperatures. */
  readonly from: number;
}

/** y = (x + before) × num / den + after */
export interface UnitConversion {
  readonly before: number;
  readonly num: number;
  readonly den: number;
  readonly after: number;
}

/** Why there is no conversion. */
export type UnitFault =
  /** No unit of the table. */
  { readonly kind: 'unknown'; readonly code: string; readonly hint: string | null } | { readonly kind: 'dimension' };

class UnknownUnit extends Error {
  readonly hint: string | null;
  constructor(hint: string | null) {
    super('unknown unit');
    this.hint = hint;
  }
}

const NO_DIMENSION: readonly number[] = BASE_UNITS.map(() => 0);
const ONE: Unit = { num: 1, den: 1, dimension: NO_DIMENSION, from: 0 };
/** Larger exponents or longer codes are no unit of anything. */
const MAX_EXPONENT = 30;
const MAX_CODE_LENGTH = 80;

/** Units read so far: a site file names few. */
const known = new Map<string, Unit>();

const combine = (a: Unit, b: Unit, power: number): Unit => {
  const [num, den] = power >= 0 ? [b.num, b.den] : [b.den, b.num];
  const size = Math.abs(power);
  return {
    num: a.num * num ** size,
    den: a.den * den ** size,
    dimension: a.dimension.map((exponent, i) => exponent + power * b.dimension[i]!),
    from: 0,
  };
};

/** A decimal as a quotient: "2.54" is 254 / 100. */
const quotient = (text: string): Unit => {
  const [whole, part = ''] = text.split('.');
  return { ...ONE, num: Number(whole! + part), den: 10 ** part.length };
};

const definition = (text: string): Unit => {
  const [value, unit] = text.split(' ');
  return combine(quotient(value!), readUnit(unit!), 1);
};

const own = (table: Readonly<Record<string, string>>, key: string): string | undefined =>
  Object.hasOwn(table, key) ? table[key] : undefined;

const plainSymbol = (symbol: string): Unit | null => {
  const base = (BASE_UNITS as readonly string[]).indexOf(symbol);
  if (base >= 0) return { ...ONE, dimension: NO_DIMENSION.map((_, i) => (i === base ? 1 : 0)) };
  const text = own(METRIC_UNITS, symbol) ?? own(OTHER_UNITS, symbol);
  return text === undefined ? null : definition(text);
};

const isMetric = (symbol: string): boolean =>
  (BASE_UNITS as readonly string[]).includes(symbol) || Object.hasOwn(METRIC_UNITS, symbol);

const readSymbol = (symbol: string): Unit => {
  const before = known.get(symbol);
  if (before !== undefined) return before;
  let unit = plainSymbol(symbol);
  for (let length = 1; unit === null && length <= 2; length++) {
    const prefix = symbol.slice(0, length);
    const rest = symbol.slice(length);
    if (!Object.hasOwn(PREFIX_POWERS, prefix) || !isMetric(rest)) continue;
    unit = combine(plainSymbol(rest)!, { ...ONE, num: 10 }, PREFIX_POWERS[prefix]!);
  }
  if (unit === null) throw new UnknownUnit(Object.hasOwn(TEMPERATURES, symbol) ? 'K' : null);
  known.set(symbol, unit);
  return unit;
};

/** A symbol with its exponent: what stands before the last digits and their sign, unless there is nothing before. */
const COMPONENT = /^(10[*^]|.*?[^\d+-])([+-]?\d+)?$/;

const readComponent = (text: string): Unit => {
  if (/^[1-9]\d{0,14}$/.test(text)) return { ...ONE, num: Number(text) };
  const match = COMPONENT.exec(text);
  if (match === null) throw new UnknownUnit(null);
  const power = match[2] === undefined ? 1 : Number(match[2]);
  if (Math.abs(power) > MAX_EXPONENT || power === 0) throw new UnknownUnit(null);
  return combine(ONE, readSymbol(match[1]!), power);
};

/** Splits a term at its own level: each operator with the text up to the next one. */
const partsOf = (code: string): readonly { readonly isOver: boolean; readonly text: string }[] => {
  const parts: { isOver: boolean; text: string }[] = [{ isOver: false, text: '' }];
  let depth = 0;
  for (const char of code) {
    if (char === '(') depth++;
    if (char === ')') depth--;
    if (depth < 0) throw new UnknownUnit(null);
    if (depth === 0 && (char === '.' || char === '/')) parts.push({ isOver: char === '/', text: '' });
    else parts.at(-1)!.text += char;
  }
  if (depth !== 0) throw new UnknownUnit(null);
  return parts;
};

/** A product or quotient, from left to right (UCUM section 7). */
function readUnit(code: string): Unit {
  const parts = partsOf(code);
  let unit = ONE;
  parts.forEach(({ isOver, text }, i) => {
    // "/h" begins with nothing over.
    if (i === 0 && text === '' && parts.length > 1 && parts[1]!.isOver) return;
    const inner = text.startsWith('(') && text.endsWith(')') ? readUnit(text.slice(1, -1)) : readComponent(text);
    unit = combine(unit, inner, isOver ? -1 : 1);
  });
  return unit;
}

const readCode = (code: string): Unit => {
  if (code.length > MAX_CODE_LENGTH) throw new UnknownUnit(null);
  // Annotations such as {rev} change nothing (UCUM section 12): alone they stand for 1.
  const bare = code.replace(/\{[!-z|~]*\}/g, (_, at: number) => (at === 0 || /[./(]/.test(code[at - 1]!) ? '1' : ''));
  const scale = Object.hasOwn(TEMPERATURES, bare) ? TEMPERATURES[bare]! : null;
  return scale === null ? readUnit(bare) : { ...readUnit(scale.unit), from: scale.from };
};

const reduced = (num: number, den: number): readonly [number, number] => {
  if (!Number.isSafeInteger(num) || !Number.isSafeInteger(den)) return [num / den, 1];
  let [a, b] = [num, den];
  while (b !== 0) [a, b] = [b, a % b];
  return [num / a, den / a];
};

/**
 * How numbers in one unit become numbers in another.
 *
 * units   UCUM codes, case sensitive
 * source  UCUM sections 6 to 12 (grammar), 21 and 22 (units with an offset)
 */
export const convertUnits = (from: string, to: string): UnitConversion | UnitFault => {
  const units: Unit[] = [];
  for (const code of [from, to]) {
    try {
      units.push(readCode(code));
    } catch (error) {
      if (!(error instanceof UnknownUnit)) throw error;
      return { kind: 'unknown', code, hint: error.hint };
    }
  }
  const [a, b] = units as [Unit, Unit];
  if (a.dimension.some((exponent, i) => exponent !== b.dimension[i])) return { kind: 'dimension' };
  const [num, den] = reduced(a.num * b.den, a.den * b.num);
  // Twelve digits: 459.67 less 491.67 is -32, not a little less. Of the two places that with the rounder number.
  const before = (a.from - (b.from * den) / num).toPrecision(12).replace(/0+$/, '');
  const after = ((a.from * num) / den - b.from).toPrecision(12).replace(/0+$/, '');
  const isBefore = before.length <= after.length;
  return { before: isBefore ? Number(before) : 0, num, den, after: isBefore ? 0 : Number(after) };
};
