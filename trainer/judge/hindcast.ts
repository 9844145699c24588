/**
 * Forecasts replayed over held-out history and scored beside the rivals.
 */

/**
 * shapes  arrays (ny × H), row-major, entry i·H + h - 1; rival arrays (rivals × ny × H)
 * units   mse in unit², mae, bias and width in unit; `standardised` ones divided by the learning part's standard deviation
 */
export interface Hindcast {
  readonly signals: readonly string[];
  readonly units: readonly string[];
  readonly horizon: number;
  readonly tickMs: number;
  /** Origins scored: the first is the tick before the held-out part, the last still has the whole horizon inside it. */
  readonly origins: number;
  readonly fromMs: number;
  readonly toMs: number;
  readonly rivals: readonly string[];
  /** Pairs of forecast and reading behind each entry. */
  readonly count: Float64Array;
  readonly mse: Float64Array;
  readonly mae: Float64Array;
  readonly bias: Float64Array;
  readonly mseStandardised: Float64Array;
  readonly maeStandardised: Float64Array;
  readonly rivalMse: Float64Array;
  readonly rivalMae: Float64Array;
  readonly nominalCoverage: number;
  readonly coverage: Float64Array;
  readonly width: Float64Array;
  /** (ny) of (ticks): one-step residual in `unit`, NaN where the reading is missing. */
  readonly residuals: readonly Float64Array[];
  /** Whole paths kept for plots, one every few ticks: origin label and (ny × H) arrays in `unit`. */
  readonly paths: readonly HindcastPath[];
  /** (ny) of (ticks): the readings of the held-out part, first at fromMs. */
  readonly readings: readonly Float64Array[];
}

export interface HindcastPath {
  readonly originMs: number;
  readonly median: Float64Array;
  readonly lower: Float64Array;
  readonly upper: Float64Array;
}
