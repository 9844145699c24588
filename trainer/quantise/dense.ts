/**
 * From a reduced recursion to the tensors of a bundle. Rounded in the order in which they act, each later factor fitted to
 * the earlier ones as they stand after rounding: poles and drive first, then the curves, then the coefficients, from the
 * moments of the rounded recursion. Poles stay float32: they are few, and 1 − |pole| of a slow one is what counts.
 */
import { type DenseTensors, dequantise, quantiseTensor, type Tensor } from '@stillwell/protocol';
import type { DenseModel } from '@stillwell/runtime/filter';
import type { StateMoments } from '../identify/bottleneck.ts';
import { curveCoefficients, findCurves, firstCurves, fullReadout } from '../identify/horizon-basis.ts';
import { type RecursionInput, recursionMoments } from '../identify/recursion-moments.ts';
import type { Layout } from '../identify/ridge.ts';
import type { ModalRecursion } from '../linalg/modal.ts';
import { multiply } from '../linalg/products.ts';
import { roundInNorm } from './nearest-plane.ts';

/** The forecast that a recursion is to give. */
export interface DenseTarget {
  readonly input: RecursionInput;
  readonly layout: Layout;
  /** (p × ny·steps) from the bank's means and resonators. */
  readonly map: Float64Array;
  /** (nc × ny·steps) from the levels; null: none. */
  readonly levelMap: Float64Array | null;
  readonly lags: readonly number[];
  /** (ny·S × lags) of each signal's own lags, for its first S steps. */
  readonly lagged: Float64Array;
}

/** Factors of a dense model. */
export type DenseFactors = Pick<
  DenseModel,
  'order' | 'basisCount' | 'pairCount' | 'poles' | 'drive' | 'hasLevel' | 'readout' | 'horizonBasis' | 'lags' | 'lagged'
>;

/** Element type of each tensor. */
const TYPES = { poles: 'f32', drive: 'i8', readout: 'i8', horizonBasis: 'i8', lagged: 'i8' } as const;

/** Packs one tensor; where the covariance of what it is applied to is known, rounding may mind it. */
type Pack = (
  name: keyof typeof TYPES,
  values: Float64Array,
  rows: number,
  cols: number,
  covariance?: Float64Array,
) => Tensor;

/**
 * The model without rounding.
 *
 * shapes  basisCount <= steps
 * units   standardised
 * throws  TrainError 'fit' if a least-squares step is singular; ProtocolError 'tensor' if a factor is not finite
 * source  file head
 * cost    one pass over the readings and O(d² p + d ny steps²)
 */
export function floatDense(target: DenseTarget, recursion: ModalRecursion, basisCount: number): DenseFactors {
  const exact: Pack = (_name, values, rows, cols) => quantiseTensor(values, rows, cols, 'f64');
  return factorsOf(makeTensors(target, recursion, basisCount, exact));
}

/**
 * The model as the bundle will hold it, and its tensors.
 *
 * shapes  as `floatDense`
 * units   standardised
 * throws  as `floatDense`
 * source  file head
 * cost    as `floatDense`
 */
export function roundedDense(
  target: DenseTarget,
  recursion: ModalRecursion,
  basisCount: number,
): { readonly factors: DenseFactors; readonly tensors: DenseTensors } {
  const pack: Pack = (name, values, rows, cols, covariance) =>
    covariance === undefined
      ? quantiseTensor(values, rows, cols, TYPES[name])
      : roundInNorm(values, rows, cols, covariance);
  const tensors = makeTensors(target, recursion, basisCount, pack);
  return { factors: factorsOf(tensors), tensors };
}

/**
 * Bytes of the tensors of a size.
 *
 * shapes  as DenseTensors
 * units   bytes
 * throws  nothing
 * source  as the types above, and four bytes a scale
 * cost    trivial
 */
export function denseBytes({ layout, levelMap, lags, lagged }: DenseTarget, order: number, basisCount: number): number {
  const { channelCount: nc, signalCount: ny, steps } = layout;
  const width = order + (levelMap === null ? 0 : nc);
  const lagBytes = lags.length > 0 ? (lagged.length / lags.length) * (lags.length + 4) : 0;
  return 4 * order + order * (nc + 4) + ny * basisCount * (width + 4) + steps * (basisCount + 4) + lagBytes;
}

function makeTensors(target: DenseTarget, recursion: ModalRecursion, basisCount: number, pack: Pack): DenseTensors {
  const { layout, lags, levelMap } = target;
  const { channelCount: nc, signalCount, steps } = layout;
  const d = recursion.modes.size;
  const poles = pack('poles', polesOf(recursion), 1, d);
  const drive = pack('drive', recursion.drive, d, nc);
  const moments = denseMoments(target, {
    modes: withPoles(recursion, dequantise(poles)),
    drive: dequantise(drive),
  });
  const width = d + (levelMap === null ? 0 : nc);
  const full = fullReadout(moments, width, layout);
  const curves = firstCurves(findCurves(full, moments.covariance, width, layout), steps, basisCount);
  const horizonBasis = pack('horizonBasis', curves, steps, basisCount);
  const coefficients = curveCoefficients(full, dequantise(horizonBasis), width, layout, basisCount);
  const rows = lags.length > 0 ? target.lagged.length / lags.length : 0;
  return {
    pairs: recursion.modes.isComplex.reduce((sum, flag) => sum + flag, 0),
    poles,
    drive,
    ...(levelMap === null ? {} : { level: true as const }),
    readout: pack('readout', coefficients, signalCount * basisCount, width, moments.covariance),
    horizonBasis,
    ...(rows > 0 ? { lags, lagged: pack('lagged', target.lagged, rows, lags.length) } : {}),
  };
}

/** The tensors, ready to compute with. */
function factorsOf(tensors: DenseTensors): DenseFactors {
  const { pairs, poles, drive, level, readout, horizonBasis, lags = [], lagged } = tensors;
  return {
    order: poles.cols,
    basisCount: horizonBasis.cols,
    pairCount: pairs,
    poles: dequantise(poles),
    drive: dequantise(drive),
    ...(level === true ? { hasLevel: true } : {}),
    readout: dequantise(readout),
    horizonBasis: dequantise(horizonBasis),
    lags: Int32Array.from(lags),
    lagged: lagged === undefined ? new Float64Array(0) : dequantise(lagged),
  };
}

/**
 * Moments of the numbers that a dense model reads out, state first, then levels, with the target's forecast.
 *
 * shapes  n = d, or d + nc with levels: covariance (n × n), shared (n × ny·steps)
 * units   standardised
 * throws  nothing
 * source  definition
 * cost    one pass over the readings and O(d p ny steps)
 */
export function denseMoments(target: DenseTarget, recursion: ModalRecursion): StateMoments {
  const { input, layout, map, levelMap } = target;
  const { channelCount: nc } = layout;
  const d = recursion.modes.size;
  const p = input.bank.recursion.modes.size;
  const width = layout.signalCount * layout.steps;
  const own = recursionMoments(input, recursion);
  const shared = multiply(own.withBank, map, d, p, width);
  if (levelMap === null) return { covariance: own.covariance, shared };
  const n = d + nc;
  const covariance = new Float64Array(n * n);
  for (let k = 0; k < d; k++) {
    covariance.set(own.covariance.subarray(k * d, (k + 1) * d), k * n);
    for (let c = 0; c < nc; c++) {
      covariance[k * n + d + c] = own.withLevels[k * nc + c];
      covariance[(d + c) * n + k] = own.withLevels[k * nc + c];
    }
  }
  for (let c = 0; c < nc; c++) covariance.set(input.levelCovariance.subarray(c * nc, (c + 1) * nc), (d + c) * n + d);
  const all = new Float64Array(n * width);
  add(all, 0, shared, multiply(own.withLevels, levelMap, d, nc, width));
  const levels = multiply(input.levelsWithBank, map, nc, p, width);
  add(all, d * width, levels, multiply(input.levelCovariance, levelMap, nc, nc, width));
  return { covariance, shared: all };
}

function add(into: Float64Array, at: number, a: Float64Array, b: Float64Array): void {
  for (let k = 0; k < a.length; k++) into[at + k] = a[k] + b[k];
}

/** (d) re, im of each pair, then the real poles: modes stand in that order. */
function polesOf({ modes }: ModalRecursion): Float64Array {
  const out = new Float64Array(modes.size);
  modes.first.forEach((at, k) => {
    out[at] = modes.re[k];
    if (modes.isComplex[k] === 1) out[at + 1] = modes.im[k];
  });
  return out;
}

function withPoles({ modes }: ModalRecursion, poles: Float64Array): ModalRecursion['modes'] {
  return {
    ...modes,
    re: Float64Array.from(modes.first, (at) => poles[at]),
    im: Float64Array.from(modes.first, (at, k) => (modes.isComplex[k] === 1 ? poles[at + 1] : 0)),
  };
}
