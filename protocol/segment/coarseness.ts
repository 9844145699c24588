/**
 * Resolution shed under a byte budget: a channel's readings are kept on every 2nd, 4th, … step of its lattice, its
 * coarseness being the power of two. The gateway rounds before its filter sees the reading, so that the desk, which gets
 * the rounded one, still replays the filter to the bit; nothing else of a segment changes.
 */
import { segmentError } from './limits.ts';

/** Coarsest: 2^15 steps of the sensor, half a byte in the header. */
export const MAX_COARSENESS = 15;

/**
 * The lattice index that stands for `index` at a coarseness: the nearest multiple of 2^coarseness, halves upwards.
 *
 * units   lattice indices; NaN stays NaN; nought is never -0
 */
export function coarseIndex(index: number, coarseness: number): number {
  if (coarseness === 0) return index;
  const steps = 2 ** coarseness;
  return Math.round(index / steps) * steps + 0;
}

/** (nc) steps of the sensor that one step of the record is worth; null where every channel has its full resolution. */
export function stepsOf(coarseness: Uint8Array): Float64Array | null {
  return coarseness.some((power) => power > 0) ? Float64Array.from(coarseness, (power) => 2 ** power) : null;
}

/** Bytes that the coarseness of so many channels takes in a header: half a byte each. */
export function coarsenessBytes(channelCount: number): number {
  return (channelCount + 1) >> 1;
}

/** Half a byte a channel, the first one in the upper half. */
export function packCoarseness(coarseness: Uint8Array): Uint8Array {
  const packed = new Uint8Array(coarsenessBytes(coarseness.length));
  coarseness.forEach((power, c) => {
    packed[c >> 1]! |= c % 2 === 0 ? power << 4 : power;
  });
  return packed;
}

/** Takes it back; throws  ProtocolError 'segment' where nothing is coarse, or a half byte too many is not nought */
export function unpackCoarseness(packed: Uint8Array, channelCount: number): Uint8Array {
  const powers = Uint8Array.from({ length: channelCount }, (_, c) => (packed[c >> 1]! >> (c % 2 === 0 ? 4 : 0)) & 15);
  const hasRest = channelCount % 2 === 1 && (packed[packed.length - 1]! & 15) !== 0;
  if (hasRest || powers.every((power) => power === 0))
    throw segmentError(
      'segment coarseness: expected a channel coarser than its sensor and no bits beside, got otherwise',
    );
  return powers;
}

/** Refuses what no header can say. */
export function checkCoarseness(coarseness: Uint8Array, channelCount: number): void {
  if (coarseness.length === channelCount && coarseness.every((power) => power <= MAX_COARSENESS)) return;
  throw segmentError(`segment coarseness: expected ${channelCount} powers of two up to ${MAX_COARSENESS}`, {
    coarseness: Array.from(coarseness),
  });
}
