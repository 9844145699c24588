/**
 * The immutable model, ready to compute with: dequantised once, shared by any number of states. What every kind has stands
 * in `CommonModel`; what a kind adds stands in its own interface, and its kernel (kernel.ts) alone reads that.
 */
import type { Agreement } from './agreement.ts';
import type { DrivenModel } from './driven-model.ts';
import type { FeaturedModel } from './featured-model.ts';
import type { StuckGuard } from './repeats.ts';
import type { ResponseModel } from './response.ts';
import type { Round } from './round.ts';
import type { SwitchedModel } from './switched-model.ts';

/** Shares as `crossingMap`, for limits from `low` to `high` and, less and less, for those up to one away; standardised. */
export interface OwnCrossingMap {
  readonly low: number;
  readonly high: number;
  readonly map: Float64Array;
}

/**
 * What every kind of model has: channels, scaling, clips, season, bounds and guard.
 *
 * shapes  nc channels (signals first), ny signals, d order, H horizon; row-major
 * units   everything standardised unless said otherwise
 */
export interface CommonModel {
  readonly tickMs: number;
  readonly channelCount: number;
  readonly signalCount: number;
  /** Length of the predictive state that is published. */
  readonly order: number;
  readonly horizon: number;
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
  /** Ticks; 0: no period, one bin. */
  readonly seasonalPeriod: number;
  readonly seasonalBins: number;
  /** (ny × bins) */
  readonly seasonal: Float64Array;
  readonly coverage: number;
  readonly boundsRate: number;
  /** The tracker's step at h is at most this over h + 5; absent: bounds tracked as in the first bundles. */
  readonly boundsLongRate?: number;
  /** (CROSSING_KNOTS) how often a limit was crossed where those probabilities were said; absent: as said. */
  readonly crossingMap?: Float64Array;
  /** (ny) the same for one signal and the limits where it often goes, in place of that; null or absent: there is none. */
  readonly crossingMaps?: readonly (OwnCrossingMap | null)[];
  /** Share of the one-step error's spread that is new at every later step of a crossing; absent: 1. */
  readonly crossingFresh?: number;
  /** (ny × H) */
  readonly radius: Float64Array;
  readonly rejectSd: number;
  readonly rejectMaxTicks: number;
  /** Whether a second reading as far off as the one passed over before it is taken for a jump; absent: it is not. */
  readonly confirmsJumps?: boolean;
  /** Whether memories are mended when readings come back after a gap (update.ts); absent: they are not. */
  readonly bridgesGaps?: boolean;
  readonly warmupTicks: number;
  /** What the channels say of each other; absent: too little. */
  readonly agreement?: Agreement;
  /** When a reading that repeats itself counts as missing; absent: never. */
  readonly stuck?: StuckGuard;
  /** What a plan of the inputs adds; absent: nothing, or the kind takes plans itself. */
  readonly response?: ResponseModel;
  /** What a round ago is taken away before the kernel sees a value; absent: nothing. */
  readonly round?: Round;
}

/**
 * A bank of features for every channel, a state of few combinations of them, and a read-out over the horizon.
 *
 * shapes  as CommonModel; F features a channel, r basis
 * units   everything standardised unless said otherwise
 */
export interface BankModel extends CommonModel {
  readonly featureCount: number;
  readonly basisCount: number;
  /** (decays) */
  readonly decays: Float64Array;
  /** (resonators) each */
  readonly resonatorRe: Float64Array;
  readonly resonatorIm: Float64Array;
  /** Ascending, ticks. */
  readonly lags: Int32Array;
  /** One more feature a channel, the mean less the value; absent: none. */
  readonly level?: boolean;
  /** (nc × F) multiplies each raw feature; powers of two. Order: decays, resonators (re, im, re, im …), level, lags. */
  readonly featureScale: Float64Array;
  /** (d × nc·F) */
  readonly bottleneck: Float64Array;
  /** (ny·r × d), row i·r + k */
  readonly readout: Float64Array;
  /** (ny·r × (1 + nu)·F), row i·r + k: coefficient k from signal i's own features, then the inputs'; absent: none. */
  readonly own?: Float64Array;
  /** (H × r) */
  readonly horizonBasis: Float64Array;
}

/** The linear kind: the bank and its read-out, nothing else. */
export interface LinearModel extends BankModel {
  readonly kind: 'linear';
}

/**
 * The dense kind: a recursion of few numbers on the changes of all channels, kept by its poles.
 *
 * shapes  as CommonModel; r basis
 * units   everything standardised unless said otherwise
 */
export interface DenseModel extends CommonModel {
  readonly kind: 'dense';
  readonly basisCount: number;
  /** Complex poles, each of two numbers of the state, before the real ones. */
  readonly pairCount: number;
  /** (d) re, im of each pair, then the real poles. */
  readonly poles: Float64Array;
  /** (d × nc) */
  readonly drive: Float64Array;
  /** The read-out also sees every channel's level, the mean less the value; absent: it does not. */
  readonly hasLevel?: boolean;
  /** (ny·r × d), or d + nc with the level; row i·r + k */
  readonly readout: Float64Array;
  /** (H × r) */
  readonly horizonBasis: Float64Array;
  /** Ascending, ticks. */
  readonly lags: Int32Array;
  /** (ny·S × lags), row i·S + h − 1: what z(t − lag) − z(t) of signal i adds to its step h. */
  readonly lagged: Float64Array;
}

/** Every kind there is; code outside the kernels uses the fields of CommonModel alone. */
export type Model = LinearModel | DenseModel | FeaturedModel | SwitchedModel | DrivenModel;
