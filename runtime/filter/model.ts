/**
 * The immutable model of the linear kind, ready to compute with: dequantised once, shared by any number of states.
 */
import { type Bundle, dequantise, type Tensor } from '@stillwell/protocol';
import { checkModel } from './check.ts';
import { FilterError } from './errors.ts';

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
  /** Ticks; 0: no period, one bin. */
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

/**
 * Dequantises a bundle into a model that has passed `checkModel`.
 *
 * throws  FilterError 'model' when a number or a shape cannot be computed with; ProtocolError 'tensor' from dequantising
 */
export function modelFromBundle(bundle: Bundle): LinearModel {
  const { channels, linear } = bundle;
  const perChannel = (pick: (channel: (typeof channels)[number]) => number): Float64Array =>
    Float64Array.from(channels, pick);
  const signalCount = channels.filter((channel) => channel.role === 'signal').length;
  if (channels.slice(0, signalCount).some((channel) => channel.role !== 'signal')) {
    throw new FilterError('model', 'bundle channels: expected all signals before all inputs, got them mixed');
  }
  const model: LinearModel = {
    kind: 'linear',
    tickMs: bundle.tickMs,
    channelCount: channels.length,
    signalCount,
    featureCount: linear.decays.length + 2 * linear.resonators.length + linear.lags.length,
    order: linear.bottleneck.rows,
    basisCount: linear.horizonBasis.cols,
    horizon: bundle.horizon,
    decays: Float64Array.from(linear.decays),
    resonatorRe: Float64Array.from(linear.resonators, ([re]) => re),
    resonatorIm: Float64Array.from(linear.resonators, ([, im]) => im),
    lags: Int32Array.from(linear.lags),
    featureScale: powersOfTwo(linear.featureExponents),
    bottleneck: dequantise(linear.bottleneck),
    readout: dequantise(linear.readout),
    horizonBasis: dequantise(linear.horizonBasis),
    mean: perChannel((channel) => channel.mean),
    scale: perChannel((channel) => channel.scale),
    latticeStep: perChannel((channel) => channel.lattice.step),
    latticeOffset: perChannel((channel) => channel.lattice.offset),
    clipLow: perChannel((channel) => channel.clip[0]),
    clipHigh: perChannel((channel) => channel.clip[1]),
    residualScale: perChannel((channel) => channel.residualScale),
    seasonalPeriod: bundle.seasonal.periodTicks,
    seasonalBins: bundle.seasonal.table.cols,
    seasonal: dequantise(bundle.seasonal.table),
    coverage: bundle.bounds.coverage,
    boundsRate: bundle.bounds.rate,
    radius: dequantise(bundle.bounds.radius),
    rejectSd: bundle.guard.rejectSd,
    rejectMaxTicks: bundle.guard.maxTicks,
    warmupTicks: bundle.warmupTicks,
  };
  checkModel(model);
  return model;
}

/** 2^exponent by repeated doubling or halving: exact, and without Math.pow. */
function powersOfTwo(exponents: Tensor): Float64Array {
  return dequantise(exponents).map((exponent) => {
    let power = 1;
    for (let k = 0; k < exponent; k++) power *= 2;
    for (let k = 0; k > exponent; k--) power /= 2;
    return power;
  });
}
