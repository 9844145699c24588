/** From the sections of a bundle with random features to what the kernels compute with: features drawn, tensors dequantised. */
import { type DrivenTensors, dequantise, type FeatureTensors } from '@stillwell/protocol';
import type { DrivenModel } from './driven-model.ts';
import { type Draw, scaledFeatures } from './featured-draw.ts';
import type { FeaturedModel } from './featured-model.ts';
import type { BankModel, CommonModel } from './model.ts';

/** The correction of the featured kind. */
export function correctionOf(section: FeatureTensors): Omit<FeaturedModel, keyof BankModel | 'kind'> {
  const { seed, count, states, channels, lags, scale, projection, offset, readout } = section;
  return {
    summaryStates: states,
    summaryChannels: Int32Array.from(channels),
    summaryLags: Int32Array.from(lags),
    randomCount: count,
    ...scaledFeatures(seed, count, scale),
    correctionCount: projection.rows,
    projection: dequantise(projection),
    offset: dequantise(offset),
    correctionReadout: dequantise(readout),
  };
}

/** The simulation of the driven kind. */
export function simulationOf(
  section: DrivenTensors,
  common: Pick<CommonModel, 'channelCount' | 'signalCount'>,
): Omit<DrivenModel, 'kind' | Exclude<keyof CommonModel, 'order'>> {
  const { members, hidden, features, sensor } = section;
  return {
    order: members * (common.signalCount + hidden),
    memberCount: members,
    hiddenCount: hidden,
    randomCount: features,
    linear: dequantise(section.linear),
    featureGain: dequantise(section.gain),
    ...memberFeatures(section.seed, members, features, common.channelCount + hidden, section.width),
    start: dequantise(section.start),
    outputLow: Float64Array.from(sensor, ([low]) => low),
    outputHigh: Float64Array.from(sensor, ([, high]) => high),
    fadeDecays: Float64Array.from(section.fadeDecays),
    meanDecays: Float64Array.from(section.meanDecays),
    deviationGain: dequantise(section.deviation),
    inputGain: dequantise(section.inputs),
    settleTicks: section.settleTicks,
  };
}

/**
 * Features of every member, one below the other; member s has the seed `seed + s`.
 *
 * shapes  frequencies (members·count × dims), phases (members·count)
 * units   turns
 * throws  nothing
 * source  featured-draw.ts
 * cost    a draw a member
 */
export function memberFeatures(seed: number, members: number, count: number, dims: number, width: number): Draw {
  const frequencies = new Float64Array(members * count * dims);
  const phases = new Float64Array(members * count);
  const scale = new Float64Array(dims).fill(1 / width);
  for (let s = 0; s < members; s++) {
    const drawn = scaledFeatures(seed + s, count, scale);
    frequencies.set(drawn.frequencies, s * count * dims);
    phases.set(drawn.phases, s * count);
  }
  return { frequencies, phases };
}
