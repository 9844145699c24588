/**
 * What one unit of each kind of work takes, measured by `node test/bench/dist/size-refit.js`, which prints this file's numbers
 * anew. Measured, not thought out: when the steps of a fit change, run it again.
 */
import type { Work } from './fit-work.ts';

/** Seconds of probe.ts's loop on the machine of the measurements. */
export const PROBE_SECONDS = 0.0113;

/** Seconds a unit on that machine. */
export const SECONDS: Work = {
  start: 2.122,
  textByte: 0,
  columnReading: 3.138e-7,
  recentReading: 7.821e-7,
  featureCubed: 0,
  forecastCell: 0.000001325,
  tightSolve: 1.631e-8,
  tightPair: 7.511e-23,
  factorsByte: 1.302e-7,
  laggedPair: 0,
  olderPair: 0,
  olderReading: 0,
  streaming: 2.158,
};

/** Bytes a unit at the peak of the resident memory. */
export const BYTES: Work = {
  program: 137000000,
  recentReading: 193.7,
  recentTick: 95.26,
  featurePair: 88.53,
  forecastCell: 564.7,
  factorsByte: 3.85,
  laggedPair: 0,
  streaming: 0,
  streamedByte: 0.2835,
};

/** Bytes a unit of the bundle document. */
export const BUNDLE: Work = {
  document: 126.6,
  bound: 0,
  state: 747.5,
  learned: 12.46,
};
