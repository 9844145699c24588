/** Which words of a sender about a value's quality count as good. */

/** What may stand in a list of good values; null stands for no word at all. */
export type GoodValue = string | number | boolean | null;

/**
 * Null: true, "good" and "ok" in any case. 'opc-ua': a status code whose severity is good. Otherwise the values listed,
 * as text in any case.
 */
export type GoodRule = 'opc-ua' | readonly GoodValue[] | null;

/** Tells whether a value, undefined where there is none, counts as good. */
export type GoodTest = (value: unknown) => boolean;

const byDefault: GoodTest = (value) => {
  if (value === true || value === 'good' || value === 'ok') return true;
  return typeof value === 'string' && /^(?:good|ok)$/i.test(value.trim());
};

const UINT32 = 2 ** 32;

/**
 * Severity is the upper two bits of a status code: 00 good, 01 uncertain, 10 bad (OPC 10000-4, StatusCode; from memory).
 * JSON leaves a good status out, or writes it as an empty map, others as a number or a map with Code (OPC 10000-6 v1.05,
 * section 5.4.2.12).
 */
const byOpcUa: GoodTest = (value) => {
  if (value === undefined || value === null) return true;
  if (typeof value === 'object' && Object.keys(value).length === 0) return !Array.isArray(value);
  const code = typeof value === 'object' ? (value as Record<string, unknown>).Code : value;
  const isCode = typeof code === 'number' && Number.isInteger(code) && code >= -UINT32 / 2 && code < UINT32;
  return isCode && code >>> 30 === 0;
};

const textOf = (value: unknown): string =>
  String(value ?? null)
    .trim()
    .toLowerCase();

/** The test that a rule stands for. */
export const goodTest = (rule: GoodRule): GoodTest => {
  if (rule === null) return byDefault;
  if (rule === 'opc-ua') return byOpcUa;
  const texts = new Set(rule.map(textOf));
  return (value) => (typeof value !== 'object' || value === null ? texts.has(textOf(value)) : false);
};
