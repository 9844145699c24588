/** Rounding: how far an entry may move, what the exponents do, and that later factors make up for earlier ones. */
import { describe, expect, it } from 'vitest';
import { dequantise, type Tensor } from '../../../protocol/index.ts';
import { findDirections } from '../../../trainer/identify/bottleneck.ts';
import { floatFactors, type Learned, mapOf, roundedFactors } from '../../../trainer/quantise/quantise.ts';
import { featureExponents } from '../../../trainer/quantise/scales.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const layout = { channelCount: 2, signalCount: 2, featureCount: 5, steps: 6 };
const p = 10;
const width = 12;
const next = recurrence(7);
const uniform = (): number => next() / 2 ** 31 - 1;

function learnedOf(): Learned {
  // Features from a thousandth to a thousand in size, all correlated a little.
  const size = Float64Array.from({ length: p }, (_, f) => 10 ** (f / 1.5 - 3));
  const mix = Float64Array.from({ length: p * p }, () => 0.3 * uniform());
  for (let f = 0; f < p; f++) mix[f * p + f]! += 1;
  const covariance = new Float64Array(p * p);
  for (let a = 0; a < p; a++) {
    for (let b = 0; b < p; b++) {
      for (let k = 0; k < p; k++) covariance[a * p + b]! += mix[a * p + k]! * mix[b * p + k]! * size[a]! * size[b]!;
    }
  }
  const map = Float64Array.from({ length: p * width }, (_, at) => uniform() / size[Math.floor(at / width)]!);
  return { covariance, map, layout, bottleneck: findDirections(covariance, map, layout, p) };
}

const learned = learnedOf();

function rowScale(tensor: Tensor, row: number): number {
  return new DataView(tensor.scales.buffer, tensor.scales.byteOffset).getFloat32(4 * row, true);
}

/** Mean squared difference of two maps' forecasts over the features' covariance, as a share of the first's. */
function difference(a: Float64Array, b: Float64Array): number {
  const energy = (m: Float64Array): number => {
    let sum = 0;
    for (let j = 0; j < width; j++) {
      for (let f = 0; f < p; f++) {
        for (let g = 0; g < p; g++) sum += m[f * width + j]! * learned.covariance[f * p + g]! * m[g * width + j]!;
      }
    }
    return sum;
  };
  return energy(a.map((value, k) => value - b[k]!)) / energy(a);
}

describe('featureExponents', () => {
  it('brings every standard deviation to between 0.7 and 1.42', () => {
    featureExponents(learned.covariance, p).forEach((exponent, f) => {
      const sd = Math.sqrt(learned.covariance[f * p + f]!) * 2 ** exponent;
      expect(sd).toBeGreaterThan(0.7);
      expect(sd).toBeLessThan(1.42);
    });
  });

  it('leaves a silent feature alone', () => {
    expect(Array.from(featureExponents(Float64Array.of(0, 0, 0, 4), 2))).toEqual([0, -1]);
  });
});

describe('roundedFactors', () => {
  const { factors, tensors } = roundedFactors(learned, 8, 6);

  it('moves the state by at most half a scale in any entry', () => {
    const exact = floatFactors(learned, 8, 6).bottleneck;
    const got = dequantise(tensors.bottleneck);
    for (let at = 0; at < exact.length; at++) {
      const half = rowScale(tensors.bottleneck, Math.floor(at / p)) / 2;
      expect(Math.abs(got[at]! - exact[at]!)).toBeLessThanOrEqual(half * (1 + 1e-6));
    }
  });

  it('writes down exactly the factors it was judged with', () => {
    for (const name of ['bottleneck', 'readout', 'horizonBasis'] as const) {
      expect(Array.from(dequantise(tensors[name]))).toEqual(Array.from(factors[name]));
    }
    expect(tensors.featureExponents.rows).toBe(2);
    expect(Array.from(new Int8Array(tensors.featureExponents.data.buffer))).toEqual(Array.from(factors.exponents));
  });

  it('costs little, and without rounding nothing at full size', () => {
    const whole = mapOf(floatFactors(learned, p, 6), layout);
    // The state's ridge is 1e-10 of its variance, the covariance's 1e-9.
    expect(difference(learned.map, whole)).toBeLessThan(1e-8);
    const float = difference(learned.map, mapOf(floatFactors(learned, 8, 6), layout));
    const rounded = difference(learned.map, mapOf(factors, layout));
    expect(rounded).toBeGreaterThan(float);
    // int8 entries are off by 1/254 of the largest in a row, evenly: some 1e-5 of the energy, two factors of it.
    expect(rounded - float).toBeLessThan(2e-4);
  });
});
