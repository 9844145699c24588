/** The dense section of a bundle document: comes back as it was, and each fault is refused by the name of its field. */
import { describe, expect, test } from 'vitest';
import type { Bundle, DenseTensors } from '../../protocol/bundle.ts';
import { decodeBundle, encodeBundle } from '../../protocol/bundle-document.ts';
import { quantiseTensor, type Tensor, type TensorType } from '../../protocol/tensor.ts';
import { refusalOf } from '../support/refusal.ts';
import { sampleBundle } from '../support/sample-bundle.ts';

const filled = (rows: number, cols: number, type: TensorType, value = 0.5): Tensor =>
  quantiseTensor(new Float64Array(rows * cols).fill(value), rows, cols, type);

/** Two signals, an input, a horizon of six; five numbers, two of them a pair. */
const good: DenseTensors = {
  pairs: 1,
  poles: filled(1, 5, 'f32'),
  drive: filled(5, 3, 'i8'),
  level: true,
  readout: filled(2 * 4, 8, 'i8'),
  horizonBasis: filled(6, 4, 'i8'),
  lags: [1, 24],
  lagged: filled(2 * 3, 2, 'i8'),
};

function bundleWith(dense: DenseTensors | undefined): Bundle {
  const { linear: _linear, ...around } = sampleBundle();
  return { ...around, kind: 'dense', ...(dense === undefined ? {} : { dense }) };
}

describe('a dense section', () => {
  test('comes back as it was, with level and lags or without', () => {
    const { level: _level, lags: _lags, lagged: _lagged, ...plain } = good;
    for (const dense of [good, { ...plain, readout: filled(2 * 4, 5, 'i8') }]) {
      const bundle = bundleWith(dense);
      const document = encodeBundle(bundle);
      expect(decodeBundle(document)).toStrictEqual(bundle);
      expect(encodeBundle(decodeBundle(document))).toStrictEqual(document);
    }
  });

  test.each<[string, Partial<DenseTensors>, string]>([
    ['more pairs than numbers', { pairs: 3 }, 'dense.pairs: expected at most 2, got 3'],
    ['a real pole on the circle', { poles: filled(1, 5, 'f32', 1) }, 'dense.poles, column 0'],
    ['poles as integers', { poles: filled(1, 5, 'i16') }, 'dense.poles: expected type f32 or f64, got i16'],
    ['no numbers', { poles: filled(1, 0, 'f32') }, 'dense.poles: expected at least one column'],
    ['no curves', { horizonBasis: filled(6, 0, 'i8') }, 'dense.horizonBasis: expected at least one column'],
    ['a drive of other channels', { drive: filled(5, 2, 'i8') }, 'dense.drive: expected 5 × 3, got 5 × 2'],
    ['a read-out without the levels', { readout: filled(8, 5, 'i8') }, 'dense.readout: expected 8 × 8, got 8 × 5'],
    ['lags that fall', { lags: [24, 1] }, 'dense.lags[1]: expected a lag above 24, got 1'],
    ['lags without weights', { lagged: undefined }, 'dense.lagged: expected it together with lags'],
    ['weights for more steps than there are', { lagged: filled(14, 2, 'i8') }, 'dense.lagged: expected as many rows'],
    ['weights for half a signal', { lagged: filled(5, 2, 'i8') }, 'dense.lagged: expected as many rows'],
  ])('with %s is refused', (_, change, message) => {
    const refusal = refusalOf(() => encodeBundle(bundleWith({ ...good, ...change })));
    expect(refusal?.message).toContain(message);
  });

  test('that is not there is refused', () => {
    expect(refusalOf(() => encodeBundle(bundleWith(undefined)))?.message).toContain('dense: expected the tensors');
  });
});
