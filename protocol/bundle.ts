/**
 * The document inside a sealed bundle: everything the filter needs, and how far it may be trusted.
 * Sequence number and key epoch stand in the envelope (seal.ts), so that an old document can be sealed again under a
 * higher number with the same digest.
 */
import type { DrivenTensors, FeatureTensors } from './bundle-features.ts';
import type { SwitchedTensors } from './bundle-switched.ts';
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

/** The tensors of the dense kind; sizes: nc channels, ny signals, d order, r basis, H horizon. */
export interface DenseTensors {
  /** Complex poles; they come first, each as two numbers of the state. */
  readonly pairs: number;
  /** (1 × d) f32: re, im of each pair, then the real poles; moduli below 1. */
  readonly poles: Tensor;
  /** (d × nc) i8: what a change of each channel adds to each number of the state. */
  readonly drive: Tensor;
  /** The read-out also sees the level of every channel, the mean less the value; absent: it does not. */
  readonly level?: true | undefined;
  /** (ny·r × d) i8, or d + nc with the level; row i·r + k: coefficient k of signal i from the state, then from the levels. */
  readonly readout: Tensor;
  /** (H × r) i8: forecast z(t+h) = z(t) + Σ_k B[h-1, k] coefficient k. */
  readonly horizonBasis: Tensor;
  /** Ring lags in ticks, ascending; absent or empty: none. */
  readonly lags?: readonly number[] | undefined;
  /** (ny·S × lags) i8, row i·S + h - 1: what each z_i(t-lag) - z_i(t) adds to signal i at step h = 1..S; absent without lags. */
  readonly lagged?: Tensor | undefined;
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

/**
 * What a plan of the inputs adds to a path made without one; sizes: np planned inputs, nb poles, r curves, S looks,
 * ny signals, d order, H horizon. Standardised.
 */
export interface ResponseTensors {
  /** (np) which inputs, counted from the first input, rising. */
  readonly inputs: readonly number[];
  /** (nb) poles of the filters that the surprise of a plan runs through. */
  readonly decays: readonly number[];
  /** (ny·np) ticks before an input shows in a signal, at i·np + k. */
  readonly delay: readonly number[];
  /** (ny × np·(nb + 2)) for each input: direct, poles in order, running sum over H. */
  readonly gain: Tensor;
  /** (S) steps of the path that expectations of inputs are read from, rising. */
  readonly looks: readonly number[];
  /** (np·r × (d + ny·S + F)) of the state, each signal's path less its value now, the input's own features, if the kind has a bank. */
  readonly readout: Tensor;
  /** (np·r × H): expected input(t+h) = input(t) + Σ_k basis[k, h-1] coefficient k. */
  readonly basis: Tensor;
  /** (np) mean size of plan less expectation over the learning part, had the plan been perfect. */
  readonly surprise: readonly number[];
}

/** The round: what a signal did W ticks ago, weighted, is taken away from it and given back to its path. */
export interface RoundPart {
  /** W, at least the horizon. */
  readonly ticks: number;
  /** (ny) 0 to 1; 0: the signal has no round. */
  readonly weight: readonly number[];
}

/** What the channels say of each other, so that a sensor that drifts is told of. Standardised. */
export interface AgreementTensors {
  /** (ny × nc): a signal is Σ weight × z + offset of the other channels; nothing of itself. */
  readonly weights: Tensor;
  /** (ny) */
  readonly offset: readonly number[];
  /** (ny) standard deviation of the difference. */
  readonly scale: readonly number[];
  /** (ny) of the cumulative sum of differences; 0: the signal is not watched. */
  readonly limit: readonly number[];
}

/** Kinds of model; each has sections of its own. */
export const BUNDLE_KINDS = ['linear', 'dense', 'featured', 'switched', 'driven'] as const;

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
  /** Of the dense kind alone. */
  readonly dense?: DenseTensors | undefined;
  /** Of the featured kind alone, beside `linear`. */
  readonly features?: FeatureTensors | undefined;
  /** Of the switched kind alone, beside `linear`. */
  readonly switched?: SwitchedTensors | undefined;
  /** Of the driven kind alone. */
  readonly driven?: DrivenTensors | undefined;
  /** Absent where no input is planned, where plans do not help, and in kinds that take plans themselves. */
  readonly response?: ResponseTensors | undefined;
  /** What a round ago is taken away before the kind sees a value; absent: nothing. */
  readonly round?: RoundPart | undefined;
  /** Absent where the channels say too little of each other. */
  readonly agreement?: AgreementTensors | undefined;
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
    /**
     * As `crossing`, in whole hundredths, for one signal each and its limits from low to high, in tenths of its scale from
     * its mean; null: the signal has none of its own.
     */
    readonly crossingBySignal?:
      | readonly ({ readonly low: number; readonly high: number; readonly percent: readonly number[] } | null)[]
      | undefined;
  };
  /** Readings further than rejectSd × residualScale from their forecast are passed over, at most maxTicks in a row. */
  readonly guard: {
    readonly rejectSd: number;
    readonly maxTicks: number;
    /** A second reading as far off as the first is taken for a jump and folded in; absent: it is passed over too. */
    readonly confirmsJumps?: true | undefined;
    /** When readings come back, what stood in for the missed ones is moved towards them; absent: it stays. */
    readonly bridgesGaps?: true | undefined;
    /** (ny) a signal stands still from the reading on that ends a run of so many alike; 0: never. Absent: never. */
    readonly stuck?: readonly number[] | undefined;
    /** (ny) values, in `unit`, that a signal may repeat for ever; there with `stuck`. */
    readonly rests?: readonly (readonly number[])[] | undefined;
    /** Readings of a signal that stands still count as missing; absent: it is only told. */
    readonly stuckActs?: true | undefined;
  };
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
