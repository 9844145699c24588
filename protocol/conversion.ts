/**
 * From the number a payload holds to the reading in its signal's unit: scale and offset first, as PLC registers have
 * them, then from the unit it is sent in. Plain sums and products in a fixed order: the same payload gives the same bits.
 */
import type { Signal } from './site.ts';
import { convertUnits } from './units/unit.ts';

/** reading = ((raw × scale + offset) + before) × num / den + after */
export interface Conversion {
  readonly scale: number;
  readonly offset: number;
  readonly before: number;
  readonly num: number;
  readonly den: number;
  readonly after: number;
}

/** The keys of a signal that a conversion is made of. */
export type ConvertedSignal = Pick<Signal, 'unit' | 'sentIn' | 'scale' | 'offset'>;

const SAME = { before: 0, num: 1, den: 1, after: 0 };

/** A signal's conversion; null where the payload's number is the reading. The site file was checked: units convert. */
export const conversionOf = ({ unit, sentIn, scale, offset }: ConvertedSignal): Conversion | null => {
  if (sentIn === null && scale === 1 && offset === 0) return null;
  const found = sentIn === null ? SAME : convertUnits(sentIn, unit);
  return { scale, offset, ...('kind' in found ? SAME : found) };
};

/** The reading, in the signal's unit. */
export const convert = (how: Conversion | null, raw: number): number => {
  if (how === null) return raw;
  return ((raw * how.scale + how.offset + how.before) * how.num) / how.den + how.after;
};

/** How far a counter of this signal counts before it begins again, in the signal's unit; null: no end is known. */
export const wrapOf = (signal: ConvertedSignal & Pick<Signal, 'wrapsAt'>): number | null => {
  if (signal.wrapsAt === null) return null;
  const how = conversionOf(signal);
  return how === null ? signal.wrapsAt : (signal.wrapsAt * how.scale * how.num) / how.den;
};
