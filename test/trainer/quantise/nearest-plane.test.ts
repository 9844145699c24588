import { dequantise, quantiseTensor } from '@stillwell/protocol';
import { describe, expect, it } from 'vitest';
import { roundInNorm } from '../../../trainer/quantise/nearest-plane.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const next = recurrence(9);
const uniform = (): number => next() / 2 ** 31 - 1;
const n = 12;
const rows = 40;
/** Two states in three move together, as those of neighbouring poles do. */
const factor = Float64Array.from({ length: n * 4 }, uniform);
const covariance = Float64Array.from({ length: n * n }, (_, at) => {
  const [i, j] = [Math.floor(at / n), at % n];
  let sum = i === j ? 1e-3 : 0;
  for (let k = 0; k < 4; k++) sum += factor[i * 4 + k]! * factor[j * 4 + k]!;
  return sum;
});
const weights = Float64Array.from({ length: rows * n }, uniform);

/** Mean square that the rounding adds to what the weights are applied to. */
function cost(rounded: Float64Array): number {
  let sum = 0;
  for (let r = 0; r < rows; r++) {
    for (let i = 0; i < n; i++) {
      for (let j = 0; j < n; j++) {
        const [e, f] = [rounded[r * n + i]! - weights[r * n + i]!, rounded[r * n + j]! - weights[r * n + j]!];
        sum += e * covariance[i * n + j]! * f;
      }
    }
  }
  return sum / rows;
}

describe('roundInNorm', () => {
  const tensor = roundInNorm(weights, rows, n, covariance);

  it('costs less than half of rounding each weight by itself where states move together', () => {
    const plain = dequantise(quantiseTensor(weights, rows, n, 'i8'));
    expect(cost(dequantise(tensor))).toBeLessThan(0.5 * cost(plain));
    expect(cost(plain)).toBeGreaterThan(0);
  });

  it('with nothing moving together is off by half a scale at most', () => {
    const identity = Float64Array.from({ length: n * n }, (_, at) => (Math.floor(at / n) === at % n ? 1 : 0));
    const alone = roundInNorm(weights, rows, n, identity);
    const values = dequantise(alone);
    const scales = new DataView(alone.scales.buffer);
    values.forEach((value, at) => {
      const scale = scales.getFloat32(4 * Math.floor(at / n), true);
      expect(Math.abs(value - weights[at]!)).toBeLessThanOrEqual(scale * 0.5000001);
    });
  });

  it('keeps a row of zeros', () => {
    const zeros = roundInNorm(new Float64Array(n), 1, n, covariance);
    expect(dequantise(zeros).every((value) => value === 0)).toBe(true);
  });
});
