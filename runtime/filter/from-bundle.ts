/** From a bundle's document to a model ready to compute with. */
import {
  type AgreementTensors,
  type Bundle,
  type DenseTensors,
  dequantise,
  type LinearTensors,
  type ResponseTensors,
  type Tensor,
} from '@stillwell/protocol';
import type { Agreement } from './agreement.ts';
import { checkModel } from './check.ts';
import { FilterError } from './errors.ts';
import { correctionOf, simulationOf } from './from-features.ts';
import { sectionOf } from './from-switched.ts';
import type { BankModel, CommonModel, DenseModel, Model } from './model.ts';
import type { ResponseModel } from './response.ts';

/**
 * Dequantises a bundle into a model that has passed `checkModel`.
 *
 * throws  FilterError 'model' when a number or a shape cannot be computed with; ProtocolError 'tensor' from dequantising
 */
export function modelFromBundle(bundle: Bundle): Model {
  const model = modelOfKind(bundle);
  checkModel(model);
  return model;
}

function modelOfKind(bundle: Bundle): Model {
  const { kind, linear, dense, features, switched, driven } = bundle;
  const common = commonOf(bundle);
  if (kind === 'linear' && linear !== undefined) return { kind, ...common, ...bankOf(linear) };
  if (kind === 'dense' && dense !== undefined) return { kind, ...common, ...recursionOf(dense) };
  if (kind === 'featured' && linear !== undefined && features !== undefined) {
    return { kind, ...common, ...bankOf(linear), ...correctionOf(features) };
  }
  if (kind === 'switched' && linear !== undefined && switched !== undefined) {
    return { kind, ...common, ...bankOf(linear), switched: sectionOf(switched, common) };
  }
  if (kind === 'driven' && driven !== undefined) return { kind, ...common, ...simulationOf(driven, common) };
  throw new FilterError('model', `bundle: expected the tensors of its kind, "${kind}", got none; fit the bundle again`);
}

/** What every kind has; the order is the kind's to say. */
function commonOf(bundle: Bundle): Omit<CommonModel, 'order'> {
  const { channels } = bundle;
  const perChannel = (pick: (channel: (typeof channels)[number]) => number): Float64Array =>
    Float64Array.from(channels, pick);
  const signalCount = channels.filter((channel) => channel.role === 'signal').length;
  if (channels.slice(0, signalCount).some((channel) => channel.role !== 'signal')) {
    throw new FilterError('model', 'bundle channels: expected all signals before all inputs, got them mixed');
  }
  return {
    tickMs: bundle.tickMs,
    channelCount: channels.length,
    signalCount,
    horizon: bundle.horizon,
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
    ...(bundle.bounds.longRate === undefined ? {} : { boundsLongRate: bundle.bounds.longRate }),
    ...(bundle.bounds.crossing === undefined ? {} : { crossingMap: Float64Array.from(bundle.bounds.crossing) }),
    ...(bundle.bounds.crossingBySignal === undefined
      ? {}
      : {
          crossingMaps: bundle.bounds.crossingBySignal.map(
            (own) =>
              own && {
                low: own.low / 10,
                high: own.high / 10,
                map: Float64Array.from(own.percent, (share) => share / 100),
              },
          ),
        }),
    ...(bundle.bounds.crossingFresh === undefined ? {} : { crossingFresh: bundle.bounds.crossingFresh }),
    radius: dequantise(bundle.bounds.radius),
    rejectSd: bundle.guard.rejectSd,
    rejectMaxTicks: bundle.guard.maxTicks,
    ...(bundle.guard.confirmsJumps === true ? { confirmsJumps: true } : {}),
    ...(bundle.guard.bridgesGaps === true ? { bridgesGaps: true } : {}),
    ...stuckOf(bundle.guard),
    ...(bundle.agreement === undefined ? {} : { agreement: agreementOf(bundle.agreement) }),
    warmupTicks: bundle.warmupTicks,
    ...(bundle.response === undefined ? {} : { response: responseOf(bundle.response) }),
    ...(bundle.round === undefined
      ? {}
      : { round: { ticks: bundle.round.ticks, weight: Float64Array.from(bundle.round.weight) } }),
  };
}

/** The response to plans. */
function responseOf(response: ResponseTensors): ResponseModel {
  return {
    inputs: Int32Array.from(response.inputs),
    decays: Float64Array.from(response.decays),
    delay: Int32Array.from(response.delay),
    gain: dequantise(response.gain),
    looks: Int32Array.from(response.looks),
    readout: dequantise(response.readout),
    basis: dequantise(response.basis),
    surprise: Float64Array.from(response.surprise),
  };
}

function agreementOf({ weights, offset, scale, limit }: AgreementTensors): Agreement {
  return {
    weights: dequantise(weights),
    offset: Float64Array.from(offset),
    scale: Float64Array.from(scale),
    limit: Float64Array.from(limit),
  };
}

function stuckOf({ stuck, rests, stuckActs }: Bundle['guard']): Pick<CommonModel, 'stuck'> {
  if (stuck === undefined || rests === undefined) return {};
  const lists = rests.map((values) => Float64Array.from(values));
  return { stuck: { ticks: Int32Array.from(stuck), rests: lists, acts: stuckActs === true } };
}

/** The bank and the tensors around it. */
function bankOf(linear: LinearTensors): Omit<BankModel, Exclude<keyof CommonModel, 'order'>> {
  return {
    featureCount:
      linear.decays.length + 2 * linear.resonators.length + (linear.level === true ? 1 : 0) + linear.lags.length,
    order: linear.bottleneck.rows,
    basisCount: linear.horizonBasis.cols,
    decays: Float64Array.from(linear.decays),
    resonatorRe: Float64Array.from(linear.resonators, ([re]) => re),
    resonatorIm: Float64Array.from(linear.resonators, ([, im]) => im),
    lags: Int32Array.from(linear.lags),
    ...(linear.level === true ? { level: true } : {}),
    featureScale: powersOfTwo(linear.featureExponents),
    bottleneck: dequantise(linear.bottleneck),
    readout: dequantise(linear.readout),
    ...(linear.own === undefined ? {} : { own: dequantise(linear.own) }),
    horizonBasis: dequantise(linear.horizonBasis),
  };
}

/** The recursion and its read-out. */
function recursionOf(dense: DenseTensors): Omit<DenseModel, 'kind' | Exclude<keyof CommonModel, 'order'>> {
  return {
    order: dense.poles.cols,
    basisCount: dense.horizonBasis.cols,
    pairCount: dense.pairs,
    poles: dequantise(dense.poles),
    drive: dequantise(dense.drive),
    ...(dense.level === true ? { hasLevel: true } : {}),
    readout: dequantise(dense.readout),
    horizonBasis: dequantise(dense.horizonBasis),
    lags: Int32Array.from(dense.lags ?? []),
    lagged: dense.lagged === undefined ? new Float64Array(0) : dequantise(dense.lagged),
  };
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
