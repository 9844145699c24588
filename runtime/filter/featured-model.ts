/** The featured kind's model: what featured.ts computes with. */
import type { BankModel } from './model.ts';

/**
 * The linear kind and a correction by random Fourier features of a summary of the past.
 *
 * shapes  as BankModel; q summary numbers (the first `summaryStates` predictive states, then the values of
 *         `summaryChannels` now, then those at each of `summaryLags`), D features, k corrections
 * units   standardised; frequencies and phases in turns
 */
export interface FeaturedModel extends BankModel {
  readonly kind: 'featured';
  readonly summaryStates: number;
  /** Ascending channel indices. */
  readonly summaryChannels: Int32Array;
  /** Ascending, ticks. */
  readonly summaryLags: Int32Array;
  readonly randomCount: number;
  /** (D × q) */
  readonly frequencies: Float64Array;
  /** (D) */
  readonly phases: Float64Array;
  readonly correctionCount: number;
  /** (k × (d + D)) of the predictive state, clipped, then the features: corrections of standard deviation one in training. */
  readonly projection: Float64Array;
  /** (k) added to them */
  readonly offset: Float64Array;
  /** (ny·r × k), row i·r + b: what the corrections add to coefficient b of signal i. */
  readonly correctionReadout: Float64Array;
}
