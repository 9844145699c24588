/**
 * The document inside a sealed bundle: everything the filter needs, and how far it may be trusted.
 * Sequence number and key epoch stand in the envelope (seal.ts), so that an old document can be sealed again under a
 * higher number with the same digest.
 */
import type { Aggregate, Limits } from './site.ts';
import type { Tensor } from './tensor.ts';

/** One signal or input as the filter sees it. Signals come first, in the site file's order, then inputs. */
export interface BundleChannel {
  readonly name: string;
  readonly role: 'signal' | 'input';
  readonly unit: string;
  readonly aggregate: Aggregate;
  /** Readings are offset + k × step for integer k; the filter sees nothing finer. */
  readonly lattice: { readonly step: number; readonly offset: number };
  /** Widest values folded in, in `unit`; beyond them a reading is clipped. */
  readonly clip: readonly [number, number];
  /** Standardising: z = (y - mean) / scale. */
  readonly mean: number;
  readonly scale: number;
  readonly limits: Limits;
  /** Robust standard deviation of the one-step forecast error, standardised; > 0. */
  readonly residualScale: number;
}

/** The tensors of the linear kind; sizes: nc channels, ny signals, F features a channel, d order, r basis, H horizon. */
export interface LinearTensors {
  /** Exponential means, decay per tick, in (0, 1). */
  readonly decays: readonly number[];
  /** Damped resonators as [re, im] of the complex decay per tick, modulus < 1; each gives two features. */
  readonly resonators: readonly (readonly [number, number])[];
  /** Ring lags in ticks, ascending, each >= 1. */
  readonly lags: readonly number[];
  /** One more feature a channel, the mean less the value, between resonators and lags; absent: none. */
  readonly level?: true | undefined;
  /** (nc × F) i8, scales all 1: feature k of channel c times 2^exponent. F = decays + 2 × resonators + level + lags. */
  readonly featureExponents: Tensor;
  /** (d × nc·F) i8: state x = W φ. */
  readonly bottleneck: Tensor;
  /** (ny·r × d) i8, row i·r + k: coefficient k of signal i is V x. */
  readonly readout: Tensor;
  /** (ny·r × (1 + nu)·F) i8, row i·r + k: adds to it from signal i's own features, then the inputs'; absent: nothing. */
  readonly own?: Tensor | undefined;
  /** (H × r) i16: forecast z(t+h) = z(t) + Σ_k B[h-1, k] coefficient k. */
  readonly horizonBasis: Tensor;
}

/** Mean over the period by phase, where long gaps fade to. */
export interface SeasonalTable {
  /** Ticks in the period; 0: no period, the overall mean. Phase of tick n is n mod period. */
  readonly periodTicks: number;
  /** (ny × bins) i8 with row scales, standardised; bin = floor(phase × bins / period). One bin when the period is 0. */
  readonly table: Tensor;
}

/** The judge's numbers on held-out time, for the signals in order. */
export interface JudgeTable {
  /** Steps the rows stand for. */
  readonly horizons: readonly number[];
  readonly rivals: readonly string[];
  /** (ny × horizons) f32: mean squared error, standardised. */
  readonly mse: Tensor;
  /** (ny·rivals × horizons) f32, row i·rivals + j: skill 1 - mse/mse of rival j. */
  readonly skill: Tensor;
  /** (ny × horizons) f32: share of readings inside the bounds. */
  readonly coverage: Tensor;
  /** One plain sentence a signal. */
  readonly verdicts: readonly string[];
  readonly hasSkill: boolean;
  /** Why a person sealed it without skill; null otherwise. */
  readonly override: string | null;
}

/** Kinds of model; each has sections of its own. */
export const BUNDLE_KINDS = ['linear'] as const;

/** One of them. */
export type BundleKind = (typeof BUNDLE_KINDS)[number];

/** Said probabilities at which `bounds.crossing` stands; straight lines between. */
export const CROSSING_KNOTS = [0, 0.02, 0.05, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 0.95, 0.98, 1] as const;

/** A model, how far it may be trusted, and where it came from. */
export interface Bundle {
  readonly format: number;
  readonly arithmetic: number;
  readonly kind: BundleKind;
  readonly site: string;
  readonly equipmentClass: string;
  /** schemaHash of the site file: signals, order, units, tick. 32 bytes. */
  readonly schema: Uint8Array;
  /** Time of the last reading it learned from, ms since 1970, unless the maker said otherwise. */
  readonly madeAtMs: number;
  readonly tickMs: number;
  readonly horizon: number;
  readonly channels: readonly BundleChannel[];
  /** Absent in kinds without a feature bank. */
  readonly linear?: LinearTensors | undefined;
  readonly seasonal: SeasonalTable;
  readonly bounds: {
    readonly coverage: number;
    /** (ny × H) i16 with row scales, standardised half-widths. */
    readonly radius: Tensor;
    /** Step of the quantile tracker, as a share of the half-width. */
    readonly rate: number;
    /** The step for forecasts h ticks ahead is at most this over h + 5; absent in the first bundles, whose bounds are tracked otherwise. */
    readonly longRate?: number | undefined;
    /** How often a limit was crossed where CROSSING_KNOTS were said, rising; said probabilities are put right by it. Absent: as said. */
    readonly crossing?: readonly number[] | undefined;
    /** Share of the one-step error's spread that is new at every later step, when crossings are reckoned. Absent: 1. */
    readonly crossingFresh?: number | undefined;
  };
  /** Readings further than rejectSd × residualScale from their forecast are passed over, at most maxTicks in a row. */
  readonly guard: { readonly rejectSd: number; readonly maxTicks: number };
  readonly warmupTicks: number;
  /** Gates of trial and probation: largest accepted ratio of squared error to the serving bundle's, and ticks watched. */
  readonly gates: { readonly worseRatio: number; readonly trialTicks: number; readonly probationTicks: number };
  readonly provenance: {
    readonly historyDigest: Uint8Array;
    readonly surveyDigest: Uint8Array;
    readonly firstMs: number;
    readonly lastMs: number;
    readonly ticks: number;
    /** Digest of the bundle document it was refitted from; null for a first fit. */
    readonly previous: Uint8Array | null;
    readonly seed: number;
    /** JSON text of the options used. */
    readonly options: string;
    readonly versions: Readonly<Record<string, string>>;
  };
  readonly judge: JudgeTable;
  /**
   * Replayed before the bundle is trusted: `ticks` ticks of readings drawn from `seed` by the generator stated in
   * runtime/filter/probe.ts; `digest` is SHA-256 over all outputs as float64 little-endian; `last` the last path of signal 0.
   */
  readonly probe: {
    readonly seed: number;
    readonly ticks: number;
    readonly digest: Uint8Array;
    readonly last: readonly number[];
  };
}
