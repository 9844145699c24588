/**
 * The sections of the kinds with random features. Features are not carried but drawn from a seed, the same way everywhere
 * (runtime/filter/featured-draw.ts), and scaled.
 */
import type { Tensor } from './tensor.ts';

/** What the featured kind adds to the linear one; sizes: ny signals, r basis, q summary numbers, D features, k corrections. */
export interface FeatureTensors {
  readonly seed: number;
  /** D */
  readonly count: number;
  /** The summary: this many leading predictive states … */
  readonly states: number;
  /** … then the present values of these channels, rising, … */
  readonly channels: readonly number[];
  /** … then theirs at each of these lags in ticks, rising; q in all, at least one. */
  readonly lags: readonly number[];
  /** (q) one over the width of the Gaussian kernel along each of them, >= 0. */
  readonly scale: readonly number[];
  /** (k × (d + D)) i8: correction u = P [x; cos(Ω v + b)] + offset. */
  readonly projection: Tensor;
  /** (k × 1) f32 */
  readonly offset: Tensor;
  /** (ny·r × k) i8, row i·r + b: adds to coefficient b of signal i. */
  readonly readout: Tensor;
}

/**
 * The driven kind: members that simulate the signals from the inputs; sizes: ny signals, nu inputs, n = ny + hidden states a
 * member, D features, J fading times, K means.
 */
export interface DrivenTensors {
  /** Of the first member's features; each next member has the next seed. */
  readonly seed: number;
  /** Of the Gaussian kernel, standardised; > 0. */
  readonly width: number;
  readonly members: number;
  readonly hidden: number;
  /** D */
  readonly features: number;
  /** (members·n × (n + nu + 1)) i16: of state, inputs and a one. */
  readonly linear: Tensor;
  /** (members·n × D) i16 */
  readonly gain: Tensor;
  /** (members·hidden × (ny + nu + 1)) i16: hidden states at a first reading. */
  readonly start: Tensor;
  /** (ny) low, high: what the sensor can show, standardised. */
  readonly sensor: readonly (readonly [number, number])[];
  /** (J) in (0, 1), per tick. */
  readonly fadeDecays: readonly number[];
  /** (K) in (0, 1), per tick. */
  readonly meanDecays: readonly number[];
  /** (ny·J × (1 + K)) i16: of a signal's deviation from the simulation and of that one's means. */
  readonly deviation: Tensor;
  /** (nu·J × (1 + K)) i16: of an input's mean over the record, 0, and its means, each less the input. */
  readonly inputs: Tensor;
  /** Ticks until a simulation has forgotten where it began. */
  readonly settleTicks: number;
}
