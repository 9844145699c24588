/** The driven kind's model: what driven.ts and driven-step.ts compute with. */
import type { CommonModel } from './model.ts';

/**
 * Members, their features, and how deviations and inputs fade.
 *
 * shapes  as CommonModel; S members of n = ny + hidden states each, D features, J fading times, K means; order = S·n
 * units   standardised; frequencies and phases in turns
 */
export interface DrivenModel extends CommonModel {
  readonly kind: 'driven';
  readonly memberCount: number;
  readonly hiddenCount: number;
  readonly randomCount: number;
  /** (S·n × (n + nu + 1)): of state, inputs and a one */
  readonly linear: Float64Array;
  /** (S·n × D) */
  readonly featureGain: Float64Array;
  /** (S·D × (n + nu)) */
  readonly frequencies: Float64Array;
  /** (S·D) */
  readonly phases: Float64Array;
  /** (S·hidden × (ny + nu + 1)): hidden states at a first reading, from the readings and a one */
  readonly start: Float64Array;
  /** (ny) what the sensor can show */
  readonly outputLow: Float64Array;
  readonly outputHigh: Float64Array;
  /** (J) ρ, per tick */
  readonly fadeDecays: Float64Array;
  /** (K) decays of the means, per tick */
  readonly meanDecays: Float64Array;
  /** (ny·J × (1 + K)) of the deviation and its means */
  readonly deviationGain: Float64Array;
  /** (nu·J × (1 + K)) of less the input and its means less the input */
  readonly inputGain: Float64Array;
  /** Ticks until the simulation has forgotten where it began. */
  readonly settleTicks: number;
}
