/**
 * One metric of a Sparkplug B payload.
 *
 * source  Sparkplug 3.0 (ISO/IEC 20237): 6.4.1 the message definition, 6.4.6 Metric, 6.4.8 and 6.4.9 property sets and
 *         quality codes, 6.4.16 datatypes
 */
import { isUtf8 } from 'node:buffer';
import { BYTES, FIXED32, FIXED64, VARINT, WireReader } from './wire.ts';

/** Datatypes that are numbers or truth values, by the standard's index (section 6.4.16). */
export const DATATYPES: Readonly<Record<number, string>> = {
  ...{ 1: 'Int8', 2: 'Int16', 3: 'Int32', 4: 'Int64', 5: 'UInt8', 6: 'UInt16', 7: 'UInt32', 8: 'UInt64' },
  ...{ 9: 'Float', 10: 'Double', 11: 'Boolean' },
};

/** Quality codes of the property "Quality" (section 6.4.9): bad 0, good 192, stale 500; without it a value is good. */
export const GOOD_QUALITY = 192;

const FIELD = { name: 1, alias: 2, timestamp: 3, datatype: 4, isHistorical: 5, isNull: 7, properties: 9 } as const;
const VALUE = { int: 10, long: 11, float: 12, double: 13, boolean: 14, last: 19 } as const;

/** Which alias, where two halves of 64 bits do not fit a number. */
export type Alias = number | string;

/** A metric as it stands in the bytes; one object serves for all. */
export class Metric {
  /** Absent where aliases are used: null. */
  name: string | null = null;
  alias: Alias | null = null;
  /** Ms since 1970; NaN where absent. */
  timeMs = Number.NaN;
  /** 0 where absent. */
  datatype = 0;
  isHistorical = false;
  isNull = false;
  /** The property "Quality"; undefined where absent. */
  quality: number | string | null | undefined;
  /** Field of the value; 0: none. */
  form = 0;
  low = 0;
  high = 0;
  real = 0;
  readonly #fields = new WireReader();

  /** Reads the fields between two places; false where they are malformed. */
  read(bytes: Uint8Array, from: number, to: number): boolean {
    this.name = this.alias = null;
    this.timeMs = Number.NaN;
    this.datatype = this.form = 0;
    this.isHistorical = this.isNull = false;
    this.quality = undefined;
    const fields = this.#fields;
    fields.open(bytes, from, to);
    while (fields.next()) if (!this.#take(bytes, fields)) return false;
    return !fields.isBad;
  }

  #take(bytes: Uint8Array, fields: WireReader): boolean {
    const { field, wire } = fields;
    if (wire === VARINT) this.#number(fields);
    else if (wire === BYTES) {
      if (field === FIELD.name) this.name = textAt(bytes, fields.from, fields.to);
      else if (field === FIELD.properties) return this.#properties(bytes, fields.from, fields.to);
      else if (field > VALUE.boolean && field <= VALUE.last) this.form = field;
      return field !== FIELD.name || this.name !== null;
    } else if (wire === FIXED32 && field === VALUE.float) {
      this.form = field;
      this.real = fields.float;
    } else if (wire === FIXED64 && field === VALUE.double) {
      this.form = field;
      this.real = fields.double;
    }
    return true;
  }

  #number(fields: WireReader): void {
    const { field, low, high } = fields;
    if (field === VALUE.int || field === VALUE.long || field === VALUE.boolean) {
      this.form = field;
      this.low = low;
      this.high = high;
    } else if (field === FIELD.alias) this.alias = aliasOf(low, high);
    else if (field === FIELD.timestamp) this.timeMs = fields.unsigned;
    else if (field === FIELD.datatype) this.datatype = low;
    else if (field === FIELD.isHistorical) this.isHistorical = low !== 0;
    else if (field === FIELD.isNull) this.isNull = low !== 0;
  }

  /** Keys and values are two lists of the same order. */
  #properties(bytes: Uint8Array, from: number, to: number): boolean {
    const set = new WireReader();
    set.open(bytes, from, to);
    let found = -1;
    for (let keys = 0; set.next(); ) {
      if (set.field !== 1 || set.wire !== BYTES) continue;
      if (isQualityKey(bytes, set.from, set.to)) found = keys;
      keys++;
    }
    if (set.isBad) return false;
    if (found < 0) return true;
    set.open(bytes, from, to);
    for (let values = 0; set.next(); ) {
      if (set.field !== 2 || set.wire !== BYTES) continue;
      if (values++ === found) return this.#quality(bytes, set.from, set.to);
    }
    return true;
  }

  #quality(bytes: Uint8Array, from: number, to: number): boolean {
    const value = new WireReader();
    value.open(bytes, from, to);
    this.quality = null;
    while (value.next()) {
      if (value.field === 3 && value.wire === VARINT) this.quality = value.low | 0;
      else if (value.field === 4 && value.wire === VARINT) this.quality = value.unsigned;
      else if (value.field === 8 && value.wire === BYTES) this.quality = textAt(bytes, value.from, value.to);
    }
    return !value.isBad;
  }
}

/** "Quality", as the standard writes it, or "quality", as some senders do. */
function isQualityKey(bytes: Uint8Array, from: number, to: number): boolean {
  if (to - from !== 7 || (bytes[from] !== 0x51 && bytes[from] !== 0x71)) return false;
  for (let i = 1; i < 7; i++) if (bytes[from + i] !== 'quality'.charCodeAt(i)) return false;
  return true;
}

function textAt(bytes: Uint8Array, from: number, to: number): string | null {
  const part = bytes.subarray(from, to);
  return isUtf8(part) ? Buffer.from(part.buffer, part.byteOffset, part.length).toString('utf8') : null;
}

function aliasOf(low: number, high: number): Alias {
  return high < 2 ** 21 ? high * 2 ** 32 + low : `${high}:${low}`;
}

/**
 * The number a metric holds; NaN where it is of no such datatype, or does not fit a float64 exactly.
 *
 * datatype  of the birth, or the metric's own
 * note      Negative numbers come as their two's complement without a sign (section 6.4.16). Integers are taken from either
 *           width of field, and floats likewise, since senders differ.
 */
export function metricNumber(metric: Metric, datatype: number): number {
  const { form, low, high, real } = metric;
  if (datatype === 11) return form === VALUE.boolean ? Number(low !== 0 || high !== 0) : Number.NaN;
  if (datatype === 9 || datatype === 10) return form === VALUE.float || form === VALUE.double ? real : Number.NaN;
  if (form !== VALUE.int && form !== VALUE.long) return Number.NaN;
  if (datatype === 1) return (low << 24) >> 24;
  if (datatype === 2) return (low << 16) >> 16;
  if (datatype === 3) return low | 0;
  if (datatype === 4) return safe((high | 0) * 2 ** 32 + low);
  if (datatype >= 5 && datatype <= 7) return low;
  return datatype === 8 ? safe(high * 2 ** 32 + low) : Number.NaN;
}

function safe(value: number): number {
  return Number.isSafeInteger(value) ? value : Number.NaN;
}
