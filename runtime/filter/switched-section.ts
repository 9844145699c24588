/**
 * The part of a model that says how switched equipment drives a plant. A **mode** is one setting of the equipment (no
 * pump, one pump, two). Near-discrete signals show the mode; driven signals are what it moves. In mode m a driven signal
 * goes on by
 *
 *   z(t+1) = z(t) + drift_m + coupling_m · z(t) + s(t+1) + w(t+1)
 *
 * with s the season of the disturbance and w what remains of it (inflow, doors, weather), forecast linearly from
 * exponential means of its own past and of the inputs. At a switch from m to n the value lands at the midpoint of what the
 * old mode and the new would have given, plus an affine function of the former: when in the tick the equipment switched is
 * told by how far the old mode would have gone.
 */

/**
 * Rectified random features of the state of the section, drawn from a fixed integer generator, and what they take off the
 * error that the mean path was seen to have; none where count is 0.
 */
export interface SwitchedCorrection {
  /** Features D, beside a constant and the summary itself. */
  readonly count: number;
  /** (q·c × (D + 1 + summary)) for each forecast signal, and (H × c). */
  readonly readout: Float64Array;
  readonly basis: Float64Array;
  /** (q) largest correction. */
  readonly limit: Float64Array;
}

/**
 * shapes  M modes, n driven and k near-discrete signals, P ordered pairs of modes, K decays, v inputs; row-major
 * units   standardised
 */
export interface SwitchedSection {
  readonly modeCount: number;
  /** (k), (n), (v) channel numbers, ascending. */
  readonly discrete: Int32Array;
  readonly driven: Int32Array;
  readonly inputs: Int32Array;
  /** (q) driven and near-discrete signals whose paths come from here, ascending; the others keep the linear ones. */
  readonly forecast: Int32Array;
  /** (q × H) share of the path that is the section's, 0 to 1; the rest is the linear one. */
  readonly share: Float64Array;
  /** (M × k) value of each near-discrete signal in each mode, and (k) its spread there. */
  readonly centre: Float64Array;
  readonly spread: Float64Array;
  /** (M × n) and (M × n × n). */
  readonly drift: Float64Array;
  readonly coupling: Float64Array;
  /** (P) from mode, to mode. */
  readonly pairFrom: Int32Array;
  readonly pairTo: Int32Array;
  /** (P × n × (1 + n)) constant, then weights on the old mode's value. */
  readonly landing: Float64Array;
  /** (P × (2 + n)) of the switch's log odds: constant, weights on the old mode's value, weight on dwell / dwellLimit. */
  readonly hazard: Float64Array;
  /** Ticks in a mode beyond which the dwell counts no further. */
  readonly dwellLimit: number;
  /** (M × k × n) a near-discrete signal's slope on the driven ones within a mode; its value there is centre + slope · z. */
  readonly slope: Float64Array;
  /** Share of a near-discrete signal's distance from that value that is remembered, by mode, at each tick. */
  readonly habit: number;
  /** (K) decays of the exponential means. */
  readonly decays: Float64Array;
  /** (n) largest size of w that is believed. */
  readonly disturbanceLimit: Float64Array;
  /** (n) size of a signal's third mean beyond which its disturbance is a flood, and what is beyond goes on. */
  readonly floodFrom: Float64Array;
  /** (3 × n) values at which the plant itself holds a driven signal, below and above (±1e6: nowhere), and how near counts. */
  readonly stops: Float64Array;
  /** (F) scale of each feature, F = n·K + v·(K + 1): means of w by signal, then each input's value and means. */
  readonly featureScale: Float64Array;
  /** (n·r × 2F) on the features, then on their parts beyond the bend; (H × r): sum of w over the next h ticks = Σ_k basis[h−1, k] · (readout · features)_k. */
  readonly outlook: Float64Array;
  readonly outlookBasis: Float64Array;
  /** Ticks, 0: none; (n × bins) s at the middle of each bin. */
  readonly seasonTicks: number;
  readonly seasonBins: number;
  readonly season: Float64Array;
  /** (n × 2 × H) two curves by which the sum of w may miss its forecast, each to be multiplied by a standard normal number. */
  readonly doubt: Float64Array;
  /** (n × (1 + F)) scale of these curves: constant, then weights on the features' sizes. */
  readonly doubtScale: Float64Array;
  readonly correction: SwitchedCorrection;
}
