import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { checkTensor, dequantise, quantiseTensor, type Tensor, type TensorType } from '../../protocol/tensor.ts';
import { refusalOf } from '../support/refusal.ts';

const SEED = 20260302;
const scaleOf = (tensor: Tensor, row: number): number =>
  new DataView(tensor.scales.buffer, tensor.scales.byteOffset).getFloat32(row * 4, true);

describe('quantiseTensor', () => {
  test('a worked example: rows have scales of their own, bytes are little-endian', () => {
    const tensor = quantiseTensor(Float64Array.of(127, -63.5, 0, 254, 1, -254), 2, 3, 'i8');
    expect([scaleOf(tensor, 0), scaleOf(tensor, 1)]).toEqual([1, 2]);
    // -63.5 rounds to -63: halves go up, as Math.round does.
    expect([...new Int8Array(tensor.data.buffer)]).toEqual([127, -63, 0, 127, 1, -127]);
    expect([...dequantise(tensor)]).toEqual([127, -63, 0, 254, 2, -254]);
    const wide = quantiseTensor(Float64Array.of(32767, 258), 1, 2, 'i16');
    expect([...wide.data]).toEqual([0xff, 0x7f, 0x02, 0x01]);
  });

  test('a row of zeros has scale 0 and stays zero', () => {
    const tensor = quantiseTensor(new Float64Array(4), 2, 2, 'i16');
    expect(scaleOf(tensor, 0)).toBe(0);
    expect([...dequantise(tensor)]).toEqual([0, 0, 0, 0]);
  });

  test('a row too small for a float32 scale becomes zero', () => {
    expect([...dequantise(quantiseTensor(Float64Array.of(1e-40, 1e-300), 1, 2, 'i8'))]).toEqual([0, 0]);
  });

  test.each<[TensorType]>([['i8'], ['i16']])('%s: every element within half its row scale', (type) => {
    const largest = type === 'i8' ? 127 : 32767;
    const value = fc.double({ min: -1e30, max: 1e30, noNaN: true });
    fc.assert(
      fc.property(fc.array(value, { minLength: 6, maxLength: 6 }), (values) => {
        const matrix = Float64Array.from(values);
        const tensor = quantiseTensor(matrix, 2, 3, type);
        checkTensor(tensor, 2, 3, [type]);
        dequantise(tensor).forEach((got, i) => {
          const scale = scaleOf(tensor, Math.floor(i / 3));
          // The largest element may sit past the last integer by the float32 rounding of the scale: 2^-24 of it.
          const allowed = scale === 0 ? 2 ** -126 * largest * 2 : scale / 2 + Math.abs(matrix[i]!) * 2 ** -23;
          expect(Math.abs(got - matrix[i]!)).toBeLessThanOrEqual(allowed);
        });
      }),
      { seed: SEED },
    );
  });

  test.each<[TensorType]>([['i8'], ['i16']])('%s: what was dequantised quantises to the same bytes', (type) => {
    const value = fc.double({ min: -1e6, max: 1e6, noNaN: true });
    fc.assert(
      fc.property(fc.array(value, { minLength: 4, maxLength: 4 }), (values) => {
        const once = quantiseTensor(Float64Array.from(values), 1, 4, type);
        expect(quantiseTensor(dequantise(once), 1, 4, type)).toStrictEqual(once);
      }),
      { seed: SEED },
    );
  });

  test('f64 keeps every bit, f32 the nearest float32', () => {
    fc.assert(
      fc.property(
        fc.array(fc.float({ noNaN: true, noDefaultInfinity: true }), { minLength: 1, maxLength: 9 }),
        (values) => {
          const exact = quantiseTensor(Float64Array.from(values), 1, values.length, 'f32');
          expect([...dequantise(exact)]).toEqual(values);
        },
      ),
      { seed: SEED },
    );
    expect([...dequantise(quantiseTensor(Float64Array.of(0.1, -5e-324), 1, 2, 'f64'))]).toEqual([0.1, -5e-324]);
    expect([...dequantise(quantiseTensor(Float64Array.of(0.1), 1, 1, 'f32'))]).toEqual([Math.fround(0.1)]);
  });

  test.each<[string, Float64Array, TensorType, string]>([
    ['a length that disagrees', new Float64Array(5), 'i8', 'expected 2 × 3 = 6 values, got 5'],
    ['NaN', Float64Array.of(1, 2, 3, 4, Number.NaN, 6), 'i8', 'row 1: expected finite values'],
    ['infinity', Float64Array.of(1, 2, Number.POSITIVE_INFINITY, 4, 5, 6), 'i16', 'row 0: expected finite values'],
    ['NaN among floats', Float64Array.of(1, 2, 3, 4, Number.NaN, 6), 'f64', 'row 1: expected finite values'],
    ['a row past float32', Float64Array.of(1e300, 0, 0, 0, 0, 0), 'i8', 'row 0: expected finite values within float32'],
    ['a value past float32', Float64Array.of(1e39, 0, 0, 0, 0, 0), 'f32', 'row 0: expected finite values of type f32'],
  ])('refuses %s', (_, values, type, message) => {
    const refusal = refusalOf(() => quantiseTensor(values, 2, 3, type));
    expect(refusal.code).toBe('tensor');
    expect(refusal.message).toContain(message);
  });
});

describe('checkTensor', () => {
  const good = quantiseTensor(Float64Array.of(1, 2, 3, 4, 5, 6), 2, 3, 'i8');
  const scales = (value: number): Uint8Array => new Uint8Array(Float32Array.of(1, value).buffer);
  const f64 = (value: number): Tensor => ({
    type: 'f64',
    rows: 2,
    cols: 3,
    scales: new Uint8Array(0),
    data: new Uint8Array(Float64Array.of(0, 0, value, 0, 0, 0).buffer),
  });

  test.each<[string, Tensor, TensorType[], string]>([
    ['another type', good, ['i16', 'f32'], 'expected type i16 or f32, got i8'],
    ['another shape', { ...good, rows: 3, cols: 2 }, ['i8'], 'expected 2 × 3, got 3 × 2'],
    ['data too short', { ...good, data: new Uint8Array(5) }, ['i8'], 'expected 6 bytes of data for 2 × 3 i8, got 5'],
    ['data too long', { ...good, data: new Uint8Array(7) }, ['i8'], 'got 7'],
    [
      'scales missing',
      { ...good, scales: new Uint8Array(4) },
      ['i8'],
      'expected 8 bytes of scales for 2 rows of i8, got 4',
    ],
    ['a negative scale', { ...good, scales: scales(-1) }, ['i8'], 'row 1: expected a finite scale >= 0, got -1'],
    ['a scale that is no number', { ...good, scales: scales(Number.NaN) }, ['i8'], 'got NaN'],
    ['an infinite scale', { ...good, scales: scales(Number.POSITIVE_INFINITY) }, ['i8'], 'got Infinity'],
    ['NaN inside', f64(Number.NaN), ['f64'], 'element 2: expected a finite number, got NaN'],
    ['scales on floats', { ...f64(0), scales: scales(1) }, ['f64'], 'expected 0 bytes of scales'],
  ])('refuses %s', (_, tensor, types, message) => {
    const refusal = refusalOf(() => checkTensor(tensor, 2, 3, types, 'linear.readout'));
    expect(refusal.code).toBe('tensor');
    expect(refusal.message).toContain('linear.readout: ');
    expect(refusal.message).toContain(message);
  });

  test('data at any offset of a larger buffer reads the same', () => {
    const shifted = Uint8Array.from([9, 9, 9, ...good.data]).subarray(3);
    expect(dequantise({ ...good, data: shifted })).toStrictEqual(dequantise(good));
  });
});
