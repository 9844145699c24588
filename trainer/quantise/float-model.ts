/**
 * A model to compute with, from learned factors, before there is a bundle: for calibration, and for the audit.
 */
import { CROSSING_KNOTS } from '@stillwell/protocol';
import type { Agreement, CommonModel, LinearModel, OwnCrossingMap, Round, StuckGuard } from '@stillwell/runtime/filter';
import { type Bank, featureCount } from '../identify/bank.ts';
import type { Scaling } from '../identify/scaling.ts';
import type { Season } from '../identify/season.ts';
import type { Factors } from './quantise.ts';

/** Everything around the factors. */
export interface Surroundings {
  readonly tickMs: number;
  readonly signalCount: number;
  readonly horizon: number;
  readonly bank: Bank;
  /** (nc) */
  readonly scalings: readonly Scaling[];
  readonly lattices: readonly { readonly step: number; readonly offset: number }[];
  readonly season: Season;
  readonly coverage: number;
  readonly boundsRate: number;
  readonly warmupTicks: number;
  /** What the channels say of each other; null: too little. */
  readonly agreement: Agreement | null;
  /** For kinds whose kernel sees what is left of a round; null: none. */
  readonly round: Round | null;
}

/** How every model made here guards itself, beside what calibration finds. */
export const GUARD_RULES = { confirmsJumps: true, bridgesGaps: true } as const;

/** What calibration finds; `OPEN` before it has run. */
export interface Calibration {
  /** (nc) standardised */
  readonly residualScale: Float64Array;
  /** (ny × H) standardised */
  readonly radius: Float64Array;
  readonly rejectSd: number;
  readonly rejectMaxTicks: number;
  /** When a reading that repeats itself counts as missing; absent: never. */
  readonly stuck?: StuckGuard;
  /** Largest step of the tracker at step h, times h + 5. */
  readonly boundsLongRate?: number;
  /** What said crossing probabilities come to; absent: as said. */
  readonly crossingMap?: Float64Array;
  /** Share of the one-step error's spread that is new at every later step of a crossing. */
  readonly crossingFresh?: number;
  readonly crossingMaps?: readonly (OwnCrossingMap | null)[];
  /** Readings of the calibration part that the guard passed over, and the gain in squared error of leaving it open. */
  readonly passedOver?: number;
  readonly guardCost?: number;
}

/**
 * Joins factors and surroundings.
 *
 * shapes  as Model
 * units   as Model
 * throws  nothing; the caller checks with checkModel where it must
 * source  none
 * cost    copies
 */
export function floatModel(factors: Factors, around: Surroundings, calibration: Calibration): LinearModel {
  const { bank, round } = around;
  return {
    kind: 'linear',
    ...commonPart(around, calibration),
    ...(round === null ? {} : { round }),
    featureCount: featureCount(bank),
    order: factors.order,
    basisCount: factors.basisCount,
    decays: Float64Array.from(bank.decays),
    resonatorRe: Float64Array.from(bank.resonators, ([re]) => re),
    resonatorIm: Float64Array.from(bank.resonators, ([, im]) => im),
    lags: Int32Array.from(bank.lags),
    ...(bank.hasLevel === true ? { level: true } : {}),
    featureScale: Float64Array.from(factors.exponents, (exponent) => 2 ** exponent),
    bottleneck: factors.bottleneck,
    readout: factors.readout,
    ...(factors.hasOwn ? { own: factors.own } : {}),
    horizonBasis: factors.horizonBasis,
  };
}

/**
 * What every kind of model has, from its surroundings; the order is the kind's to say.
 *
 * shapes  as CommonModel
 * units   as CommonModel
 * throws  nothing
 * source  none
 * cost    copies
 */
export function commonPart(around: Surroundings, calibration: Calibration): Omit<CommonModel, 'order'> {
  const { scalings, lattices, season } = around;
  const perChannel = (pick: (scaling: Scaling) => number): Float64Array => Float64Array.from(scalings, pick);
  return {
    tickMs: around.tickMs,
    channelCount: scalings.length,
    signalCount: around.signalCount,
    horizon: around.horizon,
    mean: perChannel((scaling) => scaling.mean),
    scale: perChannel((scaling) => scaling.scale),
    latticeStep: Float64Array.from(lattices, (lattice) => lattice.step),
    latticeOffset: Float64Array.from(lattices, (lattice) => lattice.offset),
    clipLow: perChannel((scaling) => scaling.clipLow),
    clipHigh: perChannel((scaling) => scaling.clipHigh),
    residualScale: calibration.residualScale,
    seasonalPeriod: season.periodTicks,
    seasonalBins: season.bins,
    seasonal: season.means,
    coverage: around.coverage,
    boundsRate: around.boundsRate,
    radius: calibration.radius,
    rejectSd: calibration.rejectSd,
    rejectMaxTicks: calibration.rejectMaxTicks,
    ...GUARD_RULES,
    warmupTicks: around.warmupTicks,
    ...(around.agreement === null ? {} : { agreement: around.agreement }),
    ...(calibration.boundsLongRate === undefined ? {} : { boundsLongRate: calibration.boundsLongRate }),
    ...(calibration.crossingMap === undefined ? {} : { crossingMap: calibration.crossingMap }),
    ...(calibration.crossingMaps === undefined ? {} : { crossingMaps: calibration.crossingMaps }),
    ...(calibration.crossingFresh === undefined ? {} : { crossingFresh: calibration.crossingFresh }),
  };
}

/**
 * Largest step of the bounds' tracker at step h, times h + 5; measured on simulated plants to hold coverage without widening
 * the bounds.
 */
export const LONG_RATE = 1.5;

/** Before calibration: no reading is passed over, bounds of no width, crossing probabilities as said, by `maps` signals' own tables. */
export function openCalibration(channelCount: number, cells: number, maps = 0): Calibration {
  return {
    residualScale: new Float64Array(channelCount).fill(1),
    radius: new Float64Array(cells),
    rejectSd: 1e12,
    rejectMaxTicks: 0,
    boundsLongRate: LONG_RATE,
    crossingMap: Float64Array.from(CROSSING_KNOTS),
    crossingFresh: 0.5,
    ...(maps === 0
      ? {}
      : {
          crossingMaps: Array.from({ length: maps }, () => ({
            low: -50,
            high: 50,
            map: Float64Array.from(CROSSING_KNOTS),
          })),
        }),
  };
}
