/**
 * From a learned map to the tensors of a bundle. Rounded in the order in which they act, each later factor fitted to the
 * earlier ones as they stand after rounding: the state's rows, then the curves, then the coefficients. Decays and
 * resonators stay float64, since rounding them moves the bank itself; nothing of the recursion is rounded.
 */
import { dequantise, quantiseTensor, type Tensor } from '@stillwell/protocol';
import { type Bottleneck, stateMoments } from '../identify/bottleneck.ts';
import { curveCoefficients, findCurves, firstCurves, fullReadout } from '../identify/horizon-basis.ts';
import type { Layout } from '../identify/ridge.ts';
import { featureExponents } from './scales.ts';

/** What was learned, before it is made small. */
export interface Learned {
  /** (p × p) mean products of the unscaled features. */
  readonly covariance: Float64Array;
  /** (p × ny·steps) */
  readonly map: Float64Array;
  readonly layout: Layout;
  readonly bottleneck: Bottleneck;
}

/** Factors of the small model; `bottleneck` applies to features already multiplied by 2^exponent. */
export interface Factors {
  readonly order: number;
  readonly basisCount: number;
  /** (nc·F) */
  readonly exponents: Int8Array;
  /** (d × nc·F) */
  readonly bottleneck: Float64Array;
  /** (ny·r × d) */
  readonly readout: Float64Array;
  /** (steps × r) */
  readonly horizonBasis: Float64Array;
}

/** The factors as tensors of the bundle. */
export interface FactorTensors {
  readonly featureExponents: Tensor;
  readonly bottleneck: Tensor;
  readonly readout: Tensor;
  readonly horizonBasis: Tensor;
}

type Round = (values: Float64Array, rows: number, cols: number, type: 'i8' | 'i16') => Float64Array;

/**
 * The small model without rounding.
 *
 * shapes  order <= directions found, basisCount <= steps
 * units   standardised
 * throws  TrainError 'fit' if a least-squares step is singular
 * source  file head
 * cost    O(order p² + ny steps order p)
 */
export function floatFactors(learned: Learned, order: number, basisCount: number): Factors {
  return makeFactors(learned, order, basisCount, (values) => values);
}

/**
 * The small model as the bundle will hold it, and its tensors.
 *
 * shapes  as `floatFactors`
 * units   standardised
 * throws  as `floatFactors`; ProtocolError 'tensor' if a factor is not finite
 * source  file head
 * cost    as `floatFactors`
 */
export function roundedFactors(
  learned: Learned,
  order: number,
  basisCount: number,
): { readonly factors: Factors; readonly tensors: FactorTensors } {
  const round: Round = (values, rows, cols, type) => dequantise(quantiseTensor(values, rows, cols, type));
  const factors = makeFactors(learned, order, basisCount, round);
  const { layout } = learned;
  const p = layout.channelCount * layout.featureCount;
  return {
    factors,
    tensors: {
      featureExponents: exponentTensor(factors.exponents, layout),
      bottleneck: quantiseTensor(factors.bottleneck, order, p, 'i8'),
      readout: quantiseTensor(factors.readout, layout.signalCount * basisCount, order, 'i8'),
      horizonBasis: quantiseTensor(factors.horizonBasis, layout.steps, basisCount, 'i16'),
    },
  };
}

function makeFactors(learned: Learned, order: number, basisCount: number, round: Round): Factors {
  const { covariance, map, layout } = learned;
  const p = layout.channelCount * layout.featureCount;
  const exponents = featureExponents(covariance, p);
  const scaled = learned.bottleneck.directions.slice(0, order * p);
  for (let at = 0; at < scaled.length; at++) scaled[at] *= 2 ** -exponents[at % p];
  const bottleneck = round(scaled, order, p, 'i8');
  const directions = bottleneck.map((value, at) => value * 2 ** exponents[at % p]);
  const moments = stateMoments(directions, order, covariance, map, layout);
  const full = fullReadout(moments, order, layout);
  const curves = firstCurves(findCurves(full, moments.covariance, order, layout), layout.steps, basisCount);
  const horizonBasis = round(curves, layout.steps, basisCount, 'i16');
  const coefficients = curveCoefficients(full, horizonBasis, order, layout, basisCount);
  const readout = round(coefficients, layout.signalCount * basisCount, order, 'i8');
  return { order, basisCount, exponents, bottleneck, readout, horizonBasis };
}

/** Exponents as they travel: int8 with every scale 1. */
function exponentTensor(exponents: Int8Array, layout: Layout): Tensor {
  const scales = new Uint8Array(4 * layout.channelCount);
  const view = new DataView(scales.buffer);
  for (let c = 0; c < layout.channelCount; c++) view.setFloat32(4 * c, 1, true);
  return {
    type: 'i8',
    rows: layout.channelCount,
    cols: layout.featureCount,
    scales,
    data: new Uint8Array(exponents.buffer.slice(exponents.byteOffset, exponents.byteOffset + exponents.byteLength)),
  };
}

/**
 * The map from unscaled features that a small model amounts to; for errors by moments.
 *
 * shapes  result (p × ny·steps)
 * units   standardised
 * throws  nothing
 * source  definition
 * cost    O(p d ny r + p ny r steps)
 */
export function mapOf(factors: Factors, layout: Layout): Float64Array {
  const p = layout.channelCount * layout.featureCount;
  const { order, basisCount, exponents, bottleneck, readout, horizonBasis } = factors;
  const width = layout.signalCount * layout.steps;
  const perState = new Float64Array(order * width);
  for (let k = 0; k < order; k++) {
    for (let i = 0; i < layout.signalCount; i++) {
      for (let h = 0; h < layout.steps; h++) {
        let sum = 0;
        for (let b = 0; b < basisCount; b++) {
          sum += horizonBasis[h * basisCount + b] * readout[(i * basisCount + b) * order + k];
        }
        perState[k * width + i * layout.steps + h] = sum;
      }
    }
  }
  const out = new Float64Array(p * width);
  for (let f = 0; f < p; f++) {
    const to = out.subarray(f * width, (f + 1) * width);
    for (let k = 0; k < order; k++) {
      const weight = bottleneck[k * p + f] * 2 ** exponents[f];
      for (let j = 0; j < width; j++) to[j] += weight * perState[k * width + j];
    }
  }
  return out;
}
