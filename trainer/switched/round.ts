/**
 * The section as the bundle holds it: what the recursion lives on as float32, what is only read out as integers.
 */
import { quantiseTensor, type SwitchedTensors, type Tensor } from '@stillwell/protocol';
import type { SwitchedSection } from '@stillwell/runtime/filter';

/**
 * Tensors of a section.
 *
 * shapes  as SwitchedTensors
 * units   standardised
 * throws  ProtocolError 'tensor' if a number is not finite
 * source  none
 * cost    trivial
 */
export function switchedTensors(section: SwitchedSection, horizon: number): SwitchedTensors {
  const { modeCount: M, discrete, driven, forecast, correction } = section;
  const [n, k, P, q] = [driven.length, discrete.length, section.pairFrom.length, forecast.length];
  const F = section.featureScale.length;
  const r = section.outlookBasis.length / horizon;
  const single = (values: Float64Array, rows: number, cols: number): Tensor =>
    quantiseTensor(values, rows, cols, 'f32');
  const c = correction.basis.length / horizon;
  const width = q * c > 0 ? correction.readout.length / (q * c) : 0;
  return {
    modes: M,
    discrete: Array.from(discrete),
    driven: Array.from(driven),
    forecast: Array.from(forecast),
    share: quantiseTensor(section.share, q, horizon, 'i8'),
    centre: single(section.centre, M, k),
    spread: single(section.spread, 1, k),
    slope: single(section.slope, M * k, n),
    habit: section.habit,
    drift: single(section.drift, M, n),
    coupling: single(section.coupling, M * n, n),
    pairs: Array.from(section.pairFrom, (from, p) => [from, section.pairTo[p]] as const),
    landing: single(section.landing, P * n, 1 + n),
    hazard: single(section.hazard, P, 2 + n),
    dwellTicks: section.dwellLimit,
    decays: Array.from(section.decays),
    limit: single(section.disturbanceLimit, 1, n),
    floodFrom: single(section.floodFrom, 1, n),
    stops: single(section.stops, 3, n),
    featureScale: single(section.featureScale, 1, F),
    outlook: quantiseTensor(section.outlook, n * r, 2 * F, 'i8'),
    outlookBasis: quantiseTensor(section.outlookBasis, horizon, r, 'i16'),
    seasonTicks: section.seasonTicks,
    season: quantiseTensor(section.season, n, section.seasonBins, 'i8'),
    doubt: quantiseTensor(section.doubt, 2 * n, horizon, 'i8'),
    doubtScale: single(section.doubtScale, n, 1 + F),
    ...(correction.count === 0
      ? {}
      : {
          correction: {
            count: correction.count,
            readout: quantiseTensor(correction.readout, q * c, width, 'i8'),
            basis: quantiseTensor(correction.basis, horizon, c, 'i16'),
            limit: single(correction.limit, 1, q),
          },
        }),
  };
}
