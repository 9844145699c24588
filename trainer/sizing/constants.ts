/**
 * What one unit of each kind of work takes, measured by `node test/bench/dist/size-refit.js`, which prints this file's numbers
 * anew. Measured, not thought out: when the steps of a fit change, run it again.
 */
import type { Work } from './fit-work.ts';

/** Seconds of probe.ts's loop on the machine of the measurements. */
export const PROBE_SECONDS = 0.0115;

/** Seconds a unit on that machine. */
export const SECONDS: Work = {
  start: 1.77,
  textByte: 0,
  columnReading: 4.015e-8,
  recentReading: 0.000001415,
  featureCubed: 0,
  forecastCell: 0.000001474,
  tightSolve: 1.253e-8,
  tightPair: 1.376e-23,
  factorsByte: 9.622e-8,
  laggedPair: 0,
  olderPair: 1.005e-8,
  olderReading: 0,
  streaming: 1.108,
};

/** Bytes a unit at the peak of the resident memory. */
export const BYTES: Work = {
  program: 134000000,
  recentReading: 186.1,
  recentTick: 267.5,
  featurePair: 0,
  forecastCell: 780.1,
  factorsByte: 3.284,
  laggedPair: 0,
  streaming: 0,
  streamedByte: 0.1693,
};

/** Bytes a unit of the bundle document. */
export const BUNDLE: Work = {
  document: 98.38,
  bound: 0,
  state: 753.2,
  learned: 12.34,
};
