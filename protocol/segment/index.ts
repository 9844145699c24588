export { coarseIndex, MAX_COARSENESS } from './coarseness.ts';
export type { Correction } from './corrections.ts';
export { readSegmentHead, type SegmentHead, segmentHash } from './header.ts';
export { latticeIndex, latticeValue } from './lattice.ts';
export {
  MAX_CORRECTIONS,
  MAX_INDEX,
  MAX_SEGMENT_BYTES,
  MAX_SEGMENT_TICKS,
  MAX_SEGMENT_VALUES,
  MAX_SNAPSHOT_BYTES,
  MAX_STATE_BYTES,
} from './limits.ts';
export { SegmentReader } from './reader.ts';
export { type SegmentOpening, SegmentWriter } from './writer.ts';
