/**
 * The immutable model of the linear kind, ready to compute with: dequantised once, shared by any number of states.
 */

/**
 * shapes  nc channels (signals first), ny signals, F features a channel, d order, r basis, H horizon; row-major
 * units   everything standardised unless said otherwise
 */
export interface LinearModel {
  readonly kind: 'linear';
  readonly tickMs: number;
  readonly channelCount: number;
  readonly signalCount: number;
  readonly featureCount: number;
  readonly order: number;
  readonly basisCount: number;
  readonly horizon: number;
  /** (decays) */
  readonly decays: Float64Array;
  /** (resonators) each */
  readonly resonatorRe: Float64Array;
  readonly resonatorIm: Float64Array;
  /** Ascending, ticks. */
  readonly lags: Int32Array;
  /** (nc × F) multiplies each raw feature; powers of two. Feature order: decays, resonators (re, im, re, im …), lags. */
  readonly featureScale: Float64Array;
  /** (d × nc·F) */
  readonly bottleneck: Float64Array;
  /** (ny·r × d), row i·r + k */
  readonly readout: Float64Array;
  /** (H × r) */
  readonly horizonBasis: Float64Array;
  /** (nc) in units of the signal */
  readonly mean: Float64Array;
  readonly scale: Float64Array;
  readonly latticeStep: Float64Array;
  readonly latticeOffset: Float64Array;
  /** (nc) in units of the signal */
  readonly clipLow: Float64Array;
  readonly clipHigh: Float64Array;
  /** (nc) */
  readonly residualScale: Float64Array;
  readonly seasonalPeriod: number;
  readonly seasonalBins: number;
  /** (ny × bins) */
  readonly seasonal: Float64Array;
  readonly coverage: number;
  readonly boundsRate: number;
  /** (ny × H) */
  readonly radius: Float64Array;
  readonly rejectSd: number;
  readonly rejectMaxTicks: number;
  readonly warmupTicks: number;
}
