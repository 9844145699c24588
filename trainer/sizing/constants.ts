/**
 * What one unit of each kind of work takes, measured by `node test/bench/dist/size-refit.js`, which prints this file's numbers
 * anew. Measured, not thought out: when the steps of a fit change, run it again.
 */
import type { Work } from './fit-work.ts';

/** Seconds of probe.ts's loop on the machine of the measurements. */
export const PROBE_SECONDS = 0.0097;

/** Seconds a unit on that machine. */
export const SECONDS: Work = {
  start: 1.541,
  textByte: 0,
  columnReading: 0,
  recentReading: 0.000002821,
  featureCubed: 0,
  forecastCell: 0.00000115,
  tightSolve: 7.259e-9,
  tightPair: 1.333e-7,
  factorsByte: 0,
  laggedPair: 2.422e-7,
  olderPair: 3.96e-8,
  olderReading: 0,
  streaming: 1.018,
};

/** Bytes a unit at the peak of the resident memory. */
export const BYTES: Work = {
  program: 138500000,
  recentReading: 74.47,
  recentTick: 431.7,
  featurePair: 0,
  forecastCell: 46.48,
  factorsByte: 8.403,
  laggedPair: 6.017,
  streaming: 8943000,
  streamedByte: 3.525,
};

/** Bytes a unit of the bundle document. */
export const BUNDLE: Work = {
  document: 126.4,
  bound: 0,
  state: 748,
  learned: 12.31,
};
