/**
 * Largest segment accepted, each figure with its reason. They bound memory and time before anything inside is trusted.
 */
import { ProtocolError } from '../errors.ts';

/** Bytes of one segment: below the 256 KiB that common brokers take as their largest packet. */
export const MAX_SEGMENT_BYTES = 192 * 1024;
/** Ticks of one segment: 18 hours of seconds; longer runs close and open the next. */
export const MAX_SEGMENT_TICKS = 65_536;
/** Ticks × channels: at about 2 µs a value, one segment never keeps a reader busy for more than a few seconds. */
export const MAX_SEGMENT_VALUES = 1 << 21;
/** Late readings carried by one segment. */
export const MAX_CORRECTIONS = 65_536;
/** Inflated bytes of a keyed start: 256 channels × 60 features × 8 bytes, doubled. */
export const MAX_STATE_BYTES = 256 * 1024;
/** Bytes of a filter's snapshot that a model may ask for: should they not deflate at all, 32 KiB of readings still fit beside. */
export const MAX_SNAPSHOT_BYTES = MAX_SEGMENT_BYTES - 32 * 1024;
/** Largest magnitude of a lattice index: 40 bits, a 24-bit converter summed for eighteen hours of seconds. */
export const MAX_INDEX = 2 ** 40;

/** A refusal of this room, always with the code 'segment'. */
export function segmentError(message: string, details: Record<string, unknown> = {}, cause?: unknown): ProtocolError {
  return new ProtocolError('segment', message, cause === undefined ? { details } : { details, cause });
}
