/**
 * From a learned map to the tensors of a bundle. Rounded in the order in which they act, each later factor fitted to the
 * earlier ones as they stand after rounding: the state's rows, then the curves, then the coefficients, then the own part,
 * which takes up what the state leaves. Decays and resonators stay float64, since rounding them moves the bank itself;
 * nothing of the recursion is rounded.
 */
import { dequantise, quantiseTensor, type Tensor } from '@stillwell/protocol';
import { type Bottleneck, stateMoments } from '../identify/bottleneck.ts';
import {
  type Curves,
  curveCoefficients,
  findCurves,
  firstCurves,
  fullReadout,
  onCurves,
} from '../identify/horizon-basis.ts';
import { type Apart, ownCoefficients } from '../identify/own-part.ts';
import { type Layout, ownFeatures } from '../identify/ridge.ts';
import { multiply, transpose } from '../linalg/products.ts';
import { replacements, roundRows } from './feedback.ts';
import { featureExponents } from './scales.ts';

/** What was learned, before it is made small. */
export interface Learned {
  /** (p × p) mean products of the unscaled features. */
  readonly covariance: Float64Array;
  /** (p × ny·steps) */
  readonly map: Float64Array;
  readonly layout: Layout;
  readonly bottleneck: Bottleneck;
  /** Curves of the whole map over the horizon. */
  readonly curves: Curves;
  /** What is left where each signal has an own part. */
  readonly apart: Apart;
}

/** A size of the small model. */
export interface Size {
  readonly order: number;
  readonly basisCount: number;
  /** Whether each signal has an own part beside the state. */
  readonly hasOwn: boolean;
}

/** Factors of the small model; `bottleneck` applies to features already multiplied by 2^exponent. */
export interface Factors extends Size {
  /** (nc·F) */
  readonly exponents: Int8Array;
  /** (d × nc·F) */
  readonly bottleneck: Float64Array;
  /** (ny·r × d) */
  readonly readout: Float64Array;
  /** (ny·r × (1 + nu)·F), empty without an own part */
  readonly own: Float64Array;
  /** (steps × r) */
  readonly horizonBasis: Float64Array;
}

/** The factors as tensors of the bundle. */
export interface FactorTensors {
  readonly featureExponents: Tensor;
  readonly bottleneck: Tensor;
  readonly readout: Tensor;
  readonly own?: Tensor;
  readonly horizonBasis: Tensor;
}

/** Rounds a factor, remembers its tensor and gives back what it holds; `replaced` tells which columns are alike. */
type Round = (
  name: 'bottleneck' | 'readout' | 'own' | 'horizonBasis',
  values: Float64Array,
  rows: number,
  cols: number,
  replaced: ((row: number) => Float64Array) | null,
) => Float64Array;

/**
 * The small model without rounding.
 *
 * shapes  order <= directions found, basisCount <= steps
 * units   standardised
 * throws  TrainError 'fit' if a least-squares step is singular
 * source  file head
 * cost    O(order p² + ny steps order p)
 */
export function floatFactors(learned: Learned, size: Size): Factors {
  return makeFactors(learned, size, (_name, values) => values);
}

/**
 * The small model as the bundle will hold it, and its tensors.
 *
 * shapes  as `floatFactors`
 * units   as `floatFactors`
 * throws  as `floatFactors`; ProtocolError 'tensor' if a factor is not finite
 * source  file head
 * cost    as `floatFactors`
 */
export function roundedFactors(
  learned: Learned,
  size: Size,
): { readonly factors: Factors; readonly tensors: FactorTensors } {
  const held = new Map<string, Tensor>();
  const round: Round = (name, values, rows, cols, replaced) => {
    let tensor: Tensor;
    if (replaced === null) tensor = quantiseTensor(values, rows, cols, 'i16');
    else if (name === 'bottleneck') tensor = firstRounded(bottleneckOf(learned, size), values, rows, cols, replaced);
    else tensor = roundRows(values, rows, cols, replaced);
    held.set(name, tensor);
    return dequantise(tensor);
  };
  const factors = makeFactors(learned, size, round);
  const tensor = (name: string): Tensor => held.get(name) as Tensor;
  return {
    factors,
    tensors: {
      featureExponents: exponentTensor(factors.exponents, learned.layout),
      bottleneck: tensor('bottleneck'),
      readout: tensor('readout'),
      ...(size.hasOwn ? { own: tensor('own') } : {}),
      horizonBasis: tensor('horizonBasis'),
    },
  };
}

function bottleneckOf(learned: Learned, { hasOwn }: Size): Bottleneck {
  return (hasOwn ? learned.apart : learned).bottleneck;
}

/** Directions rounded so far: each is rounded by itself, so a larger size goes on from a smaller one. */
const ROUNDED = new WeakMap<Bottleneck, Tensor>();

function firstRounded(
  bottleneck: Bottleneck,
  values: Float64Array,
  rows: number,
  cols: number,
  replacedIn: (row: number) => Float64Array,
): Tensor {
  let known = ROUNDED.get(bottleneck);
  const done = known?.rows ?? 0;
  if (known === undefined || done < rows) {
    const more = roundRows(values.subarray(done * cols), rows - done, cols, (row) => replacedIn(done + row));
    known = known === undefined ? more : joinedRows(known, more);
    ROUNDED.set(bottleneck, known);
  }
  return Object.freeze({
    ...known,
    rows,
    scales: known.scales.slice(0, 4 * rows),
    data: known.data.slice(0, rows * cols),
  });
}

function joinedRows(first: Tensor, second: Tensor): Tensor {
  const rows = first.rows + second.rows;
  const scales = new Uint8Array(4 * rows);
  scales.set(first.scales);
  scales.set(second.scales, 4 * first.rows);
  const data = new Uint8Array(rows * first.cols);
  data.set(first.data);
  data.set(second.data, first.data.length);
  return Object.freeze({ ...first, rows, scales, data });
}

function makeFactors(learned: Learned, size: Size, round: Round): Factors {
  const { covariance, layout } = learned;
  const { order, basisCount, hasOwn } = size;
  const p = layout.channelCount * layout.featureCount;
  const exponents = featureExponents(covariance, p);
  const scaled = bottleneckOf(learned, size).directions.slice(0, order * p);
  const down = powersOf(exponents, -1);
  for (let k = 0, at = 0; k < order; k++) for (let f = 0; f < p; f++, at++) scaled[at] *= down[f];
  const bottleneck = round('bottleneck', scaled, order, p, () => alike(learned, exponents, null));
  const up = powersOf(exponents, 1);
  const directions = bottleneck.slice();
  for (let k = 0, at = 0; k < order; k++) for (let f = 0; f < p; f++, at++) directions[at] *= up[f];
  const moments = stateMoments(directions, order, covariance, hasOwn ? learned.apart.rest : learned.map, layout);
  const full = fullReadout(moments, order, layout);
  const found = hasOwn ? learned.curves : findCurves(full, moments.covariance, order, layout);
  const curves = firstCurves(found, layout.steps, basisCount);
  const horizonBasis = round('horizonBasis', curves, layout.steps, basisCount, null);
  const coefficients = curveCoefficients(full, horizonBasis, order, layout, basisCount);
  const states = replacements(moments.covariance, order);
  const readout = round('readout', coefficients, layout.signalCount * basisCount, order, () => states);
  const small = { ...size, exponents, bottleneck, readout, horizonBasis, own: new Float64Array(0) };
  return hasOwn ? { ...small, own: ownPart(learned, small, directions, round) } : small;
}

/** 2^exponent, or one over it. */
function powersOf(exponents: Int8Array, sign: 1 | -1): Float64Array {
  return Float64Array.from(exponents, (exponent) => 2 ** (sign * exponent));
}

/** (ny·r × (1 + nu)·F) what each signal's own features add to what the state gives, on the curves as they stand. */
function ownPart(learned: Learned, small: Factors, directions: Float64Array, round: Round): Float64Array {
  const { covariance, map, layout } = learned;
  const { order, basisCount: r, readout, horizonBasis, exponents } = small;
  const { signalCount: ny, steps } = layout;
  const p = layout.channelCount * layout.featureCount;
  const byFeature = transpose(directions, order, p);
  const cols = ownFeatures(layout, 0).length;
  const parts = Array.from({ length: ny }, (_, i) => {
    const columns = new Float64Array(p * steps);
    for (let f = 0; f < p; f++) {
      columns.set(map.subarray((f * ny + i) * steps, (f * ny + i + 1) * steps), f * steps);
    }
    const wanted = onCurves(columns, horizonBasis, steps, r);
    const rows = readout.subarray(i * r * order, (i + 1) * r * order);
    const given = multiply(byFeature, transpose(rows, r, order), p, order, r);
    for (let k = 0; k < wanted.length; k++) wanted[k] -= given[k];
    const chosen = ownFeatures(layout, i);
    const own = ownCoefficients(covariance, p, chosen, wanted, r);
    const scaled = new Float64Array(r * cols);
    chosen.forEach((f, a) => {
      for (let k = 0; k < r; k++) scaled[k * cols + a] = own[a * r + k] * 2 ** -exponents[f];
    });
    return scaled;
  });
  const joined = new Float64Array(ny * r * cols);
  parts.forEach((part, i) => {
    joined.set(part, i * r * cols);
  });
  return round('own', joined, ny * r, cols, (row) => alike(learned, exponents, Math.floor(row / r)));
}

/** Kept while a map is being made small at one size after another. */
const ALIKE = new WeakMap<Learned, Map<number | null, Float64Array>>();

/** How scaled features replace each other: all of them, or those of one signal's own part. */
function alike(learned: Learned, exponents: Int8Array, signal: number | null): Float64Array {
  const known = ALIKE.get(learned) ?? new Map<number | null, Float64Array>();
  ALIKE.set(learned, known);
  const found = known.get(signal);
  if (found !== undefined) return found;
  const { covariance, layout } = learned;
  const p = layout.channelCount * layout.featureCount;
  const chosen = signal === null ? Int32Array.from({ length: p }, (_, f) => f) : ownFeatures(layout, signal);
  const n = chosen.length;
  const scaled = new Float64Array(n * n);
  for (let a = 0; a < n; a++) {
    for (let b = 0; b < n; b++) {
      const power = exponents[chosen[a]] + exponents[chosen[b]];
      scaled[a * n + b] = covariance[chosen[a] * p + chosen[b]] * 2 ** power;
    }
  }
  const made = replacements(scaled, n);
  known.set(signal, made);
  return made;
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
    const scale = 2 ** exponents[f];
    const to = f * width;
    for (let k = 0; k < order; k++) {
      const weight = bottleneck[k * p + f] * scale;
      const from = k * width;
      for (let j = 0; j < width; j++) out[to + j] += weight * perState[from + j];
    }
  }
  if (factors.hasOwn) addOwnMap(factors, layout, out);
  return out;
}

function addOwnMap({ own, basisCount: r, horizonBasis, exponents }: Factors, layout: Layout, out: Float64Array): void {
  const { signalCount: ny, steps } = layout;
  for (let i = 0; i < ny; i++) {
    const chosen = ownFeatures(layout, i);
    for (let a = 0; a < chosen.length; a++) {
      const scale = 2 ** exponents[chosen[a]];
      const to = (chosen[a] * ny + i) * steps;
      for (let h = 0; h < steps; h++) {
        let sum = 0;
        for (let k = 0; k < r; k++) sum += horizonBasis[h * r + k] * own[(i * r + k) * chosen.length + a];
        out[to + h] += sum * scale;
      }
    }
  }
}
