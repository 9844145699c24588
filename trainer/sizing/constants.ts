/**
 * What one unit of each kind of work takes, measured by `node test/bench/dist/size-refit.js`, which prints this file's numbers
 * anew. Measured, not thought out: when the steps of a fit change, run it again.
 */
import type { Work } from './fit-work.ts';

/** Seconds of probe.ts's loop on the machine of the measurements. */
export const PROBE_SECONDS = 0.0099;

/** Seconds a unit on that machine. */
export const SECONDS: Work = {
  start: 2.422,
  textByte: 4.186e-8,
  columnReading: 0,
  recentReading: 0.000001629,
  featureCubed: 0,
  forecastCell: 9.594e-7,
  tightSolve: 0,
  tightPair: 3.194e-7,
  factorsByte: 1.743e-7,
  laggedPair: 1.305e-8,
  olderPair: 4.812e-8,
  olderReading: 0,
  streaming: 0.6612,
};

/** Bytes a unit at the peak of the resident memory. */
export const BYTES: Work = {
  program: 141300000,
  recentReading: 107.3,
  recentTick: 547.5,
  featurePair: 0,
  forecastCell: 364.9,
  factorsByte: 3.448,
  laggedPair: 6.242,
  streaming: 0,
  streamedByte: 6.217,
};

/** Bytes a unit of the bundle document. */
export const BUNDLE: Work = {
  document: 3742,
  channel: 726.4,
  bound: 1.875,
  map: 0,
};
