/**
 * The section of the switched kind: modes of on/off equipment, what each does to the signals it drives, when it switches,
 * and how what disturbs the plant goes on. runtime/filter/switched-section.ts says how it is computed with.
 */
import type { Tensor } from './tensor.ts';

/**
 * What the switched kind adds to the linear one; sizes: M modes, n driven and k near-discrete signals, q forecast signals, P
 * pairs of modes, v inputs, K decays, F = n·K + v·(K + 1) features, r and c curves, H horizon, D random features, and
 * W = D + 2 + 2n + M + F. All standardised.
 */
export interface SwitchedTensors {
  /** M */
  readonly modes: number;
  /** Signals that show the mode, that it drives, and whose forecasts come from this section; rising. */
  readonly discrete: readonly number[];
  readonly driven: readonly number[];
  readonly forecast: readonly number[];
  /** (q × H) i8: share of the path that comes from here, 0 to 1. */
  readonly share: Tensor;
  /** (M × k) f32: what each mode says of each near-discrete signal where the driven ones are 0. */
  readonly centre: Tensor;
  /** (1 × k) f32: its spread. */
  readonly spread: Tensor;
  /** (M·k × n) f32: its slope on the driven ones. */
  readonly slope: Tensor;
  /** Share of a near-discrete signal's distance from that value that is remembered at each tick. */
  readonly habit: number;
  /** (M × n) f32 and (M·n × n) f32: change of the driven signals in a tick, constant and by their values. */
  readonly drift: Tensor;
  readonly coupling: Tensor;
  /** Modes before and after a switch. */
  readonly pairs: readonly (readonly [number, number])[];
  /** (P·n × (1 + n)) f32: where a switch leaves the driven signals, beside the midpoint. */
  readonly landing: Tensor;
  /** (P × (2 + n)) f32: log odds of a switch: constant, by the old mode's values, by the time in it over dwellTicks. */
  readonly hazard: Tensor;
  readonly dwellTicks: number;
  /** (K) of the disturbance's means. */
  readonly decays: readonly number[];
  /** (1 × n) f32: largest disturbance believed. */
  readonly limit: Tensor;
  /** (1 × n) f32: size of a signal's third mean beyond which its disturbance is a flood that goes on. */
  readonly floodFrom: Tensor;
  /** (3 × n) f32: where the plant itself holds a driven signal, below and above, ±1e6 for nowhere; and how near counts. */
  readonly stops: Tensor;
  /** (1 × F) f32 */
  readonly featureScale: Tensor;
  /** (n·r × 2F) i8 and (H × r) i16: sum of the disturbance over the steps ahead. */
  readonly outlook: Tensor;
  readonly outlookBasis: Tensor;
  /** Period of the disturbance's season, 0: none, and (n × bins) i8. */
  readonly seasonTicks: number;
  readonly season: Tensor;
  /** (2n × H) i8: two curves a signal by which the outlook may miss; (n × (1 + F)) f32: their scale by the features. */
  readonly doubt: Tensor;
  readonly doubtScale: Tensor;
  /** What the mean path is known to miss; absent: nothing. */
  readonly correction?: SwitchedCorrectionTensors | undefined;
}

/** Random features of the section's state and their read-out. */
export interface SwitchedCorrectionTensors {
  /** D */
  readonly count: number;
  /** (q·c × W) i8 and (H × c) i16. */
  readonly readout: Tensor;
  readonly basis: Tensor;
  /** (1 × q) f32: largest correction. */
  readonly limit: Tensor;
}
