/** Rounding: how far an entry may move, what the exponents do, and that later factors make up for earlier ones. */
import { describe, expect, it } from 'vitest';
import { dequantise, type Tensor } from '../../../protocol/index.ts';
import { findDirections, stateMoments } from '../../../trainer/identify/bottleneck.ts';
import { findCurves, fullReadout } from '../../../trainer/identify/horizon-basis.ts';
import { splitOwn } from '../../../trainer/identify/own-part.ts';
import { ownFeatures } from '../../../trainer/identify/ridge.ts';
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
  const bottleneck = findDirections(covariance, map, layout, p);
  const order = bottleneck.carried.length;
  const state = stateMoments(bottleneck.directions, order, covariance, map, layout);
  const curves = findCurves(fullReadout(state, order, layout), state.covariance, order, layout);
  return { covariance, map, layout, bottleneck, curves, apart: splitOwn(covariance, map, layout, bottleneck, p) };
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

const size = { order: 8, basisCount: 6, hasOwn: false };

describe('roundedFactors', () => {
  const { factors, tensors } = roundedFactors(learned, size);

  it('moves the first column of the state, which makes up for no other, by at most half a scale', () => {
    const exact = floatFactors(learned, size).bottleneck;
    const got = dequantise(tensors.bottleneck);
    for (let at = 0; at < exact.length; at += p) {
      const half = rowScale(tensors.bottleneck, Math.floor(at / p)) / 2;
      expect(Math.abs(got[at]! - exact[at]!)).toBeLessThanOrEqual(half * (1 + 1e-6));
    }
  });

  it('gives a size the same tensors, whichever sizes were rounded before', () => {
    const fresh = (): Learned => ({ ...learned, bottleneck: { ...learned.bottleneck } });
    const size = (order: number) => ({ order, basisCount: 3, hasOwn: false });
    const [rising, falling] = [fresh(), fresh()];
    const up = [2, 3, 6].map((order) => roundedFactors(rising, size(order)));
    const down = [6, 3, 2].map((order) => roundedFactors(falling, size(order))).reverse();
    expect(up).toEqual([2, 3, 6].map((order) => roundedFactors(fresh(), size(order))));
    expect(down).toEqual(up);
  });

  it('writes down exactly the factors it was judged with', () => {
    for (const name of ['bottleneck', 'readout', 'horizonBasis'] as const) {
      expect(Array.from(dequantise(tensors[name]))).toEqual(Array.from(factors[name]));
    }
    expect(tensors.featureExponents.rows).toBe(2);
    expect(Array.from(new Int8Array(tensors.featureExponents.data.buffer))).toEqual(Array.from(factors.exponents));
  });

  it('costs little, and without rounding nothing at full size', () => {
    const whole = mapOf(floatFactors(learned, { ...size, order: p }), layout);
    // The state's ridge is 1e-10 of its variance, the covariance's 1e-9.
    expect(difference(learned.map, whole)).toBeLessThan(1e-8);
    const float = difference(learned.map, mapOf(floatFactors(learned, size), layout));
    const rounded = difference(learned.map, mapOf(factors, layout));
    expect(rounded).toBeGreaterThan(float);
    // int8 entries are off by 1/254 of the largest in a row, evenly: some 1e-5 of the energy, two factors of it.
    expect(rounded - float).toBeLessThan(2e-4);
  });
});

describe('an own part', () => {
  const own = { order: 2, basisCount: 6, hasOwn: true };
  const { factors, tensors } = roundedFactors(learned, own);

  it('travels as it was judged', () => {
    expect(Array.from(dequantise(tensors.own!))).toEqual(Array.from(factors.own));
    expect([tensors.own!.rows, tensors.own!.cols]).toEqual([12, 5]);
    expect(roundedFactors(learned, size).tensors.own).toBeUndefined();
  });

  it('leaves errors that the own features say nothing of', () => {
    const whole = floatFactors(learned, own);
    const rest = learned.map.map((value, k) => value - mapOf(whole, layout)[k]!);
    for (let i = 0; i < 2; i++) {
      for (const f of ownFeatures(layout, i)) {
        for (let h = 0; h < 6; h++) {
          let shared = 0;
          let size = 0;
          for (let g = 0; g < p; g++) {
            const part = learned.covariance[f * p + g]! * rest[g * width + i * 6 + h]!;
            shared += part;
            size += Math.abs(part);
          }
          // The own features' ridge is 1e-9 of their variance; the curves' likewise.
          expect(Math.abs(shared)).toBeLessThan(1e-6 * size + 1e-12);
        }
      }
    }
  });

  it('does better than a state of the same order alone, and rounding costs it little', () => {
    const alone = difference(learned.map, mapOf(floatFactors(learned, { ...own, hasOwn: false }), layout));
    const float = difference(learned.map, mapOf(floatFactors(learned, own), layout));
    expect(float).toBeLessThan(alone);
    expect(difference(learned.map, mapOf(factors, layout)) - float).toBeLessThan(2e-4);
  });

  it('gives all where signals say nothing of each other', () => {
    const map = learned.map.map((value, at) => {
      const isOwn = Math.floor(at / width / 5) === Math.floor((at % width) / 6);
      return isOwn ? value : 0;
    });
    const apart = splitOwn(learned.covariance, map, layout, learned.bottleneck, p);
    expect(apart.isJoint).toBe(false);
    expect(learned.apart.isJoint).toBe(true);
    const parts = { ...learned, map, apart };
    expect(difference(map, mapOf(floatFactors(parts, { ...own, order: 1 }), layout))).toBeLessThan(1e-8);
  });
});
