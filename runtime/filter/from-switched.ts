/** The switched section from a bundle's tensors. */
import { dequantise, type SwitchedTensors } from '@stillwell/protocol';
import type { SwitchedCorrection, SwitchedSection } from './switched-section.ts';

/**
 * Dequantises the section.
 *
 * shapes  as SwitchedSection
 * throws  ProtocolError 'tensor' from dequantising
 */
export function sectionOf(
  tensors: SwitchedTensors,
  { signalCount, channelCount }: { readonly signalCount: number; readonly channelCount: number },
): SwitchedSection {
  return {
    modeCount: tensors.modes,
    discrete: Int32Array.from(tensors.discrete),
    driven: Int32Array.from(tensors.driven),
    inputs: Int32Array.from({ length: channelCount - signalCount }, (_, v) => signalCount + v),
    forecast: Int32Array.from(tensors.forecast),
    // Rounding carries a share of one past it by the last bit of its row's scale.
    share: dequantise(tensors.share).map((value) => Math.min(1, Math.max(0, value))),
    centre: dequantise(tensors.centre),
    spread: dequantise(tensors.spread),
    drift: dequantise(tensors.drift),
    coupling: dequantise(tensors.coupling),
    pairFrom: Int32Array.from(tensors.pairs, ([from]) => from),
    pairTo: Int32Array.from(tensors.pairs, ([, to]) => to),
    landing: dequantise(tensors.landing),
    hazard: dequantise(tensors.hazard),
    dwellLimit: tensors.dwellTicks,
    slope: dequantise(tensors.slope),
    habit: tensors.habit,
    decays: Float64Array.from(tensors.decays),
    disturbanceLimit: dequantise(tensors.limit),
    floodFrom: dequantise(tensors.floodFrom),
    stops: dequantise(tensors.stops),
    featureScale: dequantise(tensors.featureScale),
    outlook: dequantise(tensors.outlook),
    outlookBasis: dequantise(tensors.outlookBasis),
    seasonTicks: tensors.seasonTicks,
    seasonBins: tensors.season.cols,
    season: dequantise(tensors.season),
    doubt: dequantise(tensors.doubt),
    doubtScale: dequantise(tensors.doubtScale),
    correction: correctionOf(tensors),
  };
}

function correctionOf({ correction, forecast }: SwitchedTensors): SwitchedCorrection {
  if (correction === undefined) {
    const none = new Float64Array(0);
    return { count: 0, readout: none, basis: none, limit: new Float64Array(forecast.length) };
  }
  return {
    count: correction.count,
    readout: dequantise(correction.readout),
    basis: dequantise(correction.basis),
    limit: dequantise(correction.limit),
  };
}
