/**
 * What one unit of each kind of work takes, measured by `node test/bench/dist/size-refit.js`, which prints this file's numbers
 * anew. Measured, not thought out: when the steps of a fit change, run it again.
 */
import type { Work } from './fit-work.ts';

/** Seconds of probe.ts's loop on the machine of the measurements. */
export const PROBE_SECONDS = 0.012;

/** Seconds a unit on that machine. */
export const SECONDS: Work = {
  start: 0.7,
  textByte: 4e-8,
};

/** Bytes a unit at the peak of the resident memory. */
export const BYTES: Work = {
  program: 1.459e8,
  recentTick: 411.7,
  featurePair: 224.9,
  forecastCell: 134.8,
};

/** Bytes a unit of the bundle document. */
export const BUNDLE: Work = {
  document: 3703,
  channel: 797.7,
};
