import { describe, expect, test } from 'vitest';
import type { Bundle, ResponseTensors } from '../../protocol/bundle.ts';
import { decodeBundle, encodeBundle } from '../../protocol/bundle-document.ts';
import { integerTensor } from '../support/models.ts';
import { refusalOf } from '../support/refusal.ts';
import { documentOf } from '../support/running-site.ts';

const document = documentOf({ response: true });
const bundle = decodeBundle(document);
const response = bundle.response!;

describe('the response to plans in a bundle', () => {
  test('comes back as it was written, byte for byte', () => {
    expect(encodeBundle(bundle)).toEqual(document);
    expect(response.inputs).toEqual([0]);
  });

  test('takes no byte where there is none', () => {
    const plain: Bundle = decodeBundle(documentOf());
    expect(plain.response).toBeUndefined();
    const { response: _, ...without } = bundle;
    // All but the probe, which was run under a plan, is the same.
    expect(encodeBundle({ ...without, probe: plain.probe })).toHaveLength(encodeBundle(plain).length);
  });

  const zeros = (rows: number, cols: number) =>
    integerTensor('i16', rows, cols, new Array(rows * cols).fill(0), new Array(rows).fill(1));
  test.each<[string, Partial<ResponseTensors>, RegExp]>([
    ['an input that is not there', { inputs: [1] }, /response\.inputs\[0\]: expected rising numbers up to 0, got 1/],
    ['no input', { inputs: [] }, /response\.inputs: expected at least 1 entries/],
    ['a pole of one', { decays: [0.5, 1, 0.2] }, /response\.decays\[1\]: expected less than 1/],
    ['a delay past the horizon', { delay: [0, 24] }, /response\.delay: expected ticks below the horizon, 24, got 24/],
    ['a delay too few', { delay: [0] }, /response\.delay: expected 2 numbers, got 1/],
    ['looks that fall', { looks: [24, 1] }, /response\.looks\[1\]: expected rising numbers up to 24/],
    ['gains of another shape', { gain: zeros(2, 4) }, /response\.gain: expected 2 × 5, got 2 × 4/],
    ['a basis of another horizon', { basis: zeros(2, 23) }, /response\.basis: expected 2 × 24, got 2 × 23/],
    ['a basis without rows', { basis: zeros(0, 24) }, /response\.basis: expected as many rows for each of 1 inputs/],
    ['a readout of other rows', { readout: zeros(3, 12) }, /response\.readout: expected 2 × 12, got 3 × 12/],
    ['a surprise below zero', { surprise: [-1] }, /response\.surprise\[0\]: expected at least 0, got -1/],
  ])('%s is refused', (_, part, message) => {
    expect(refusalOf(() => encodeBundle({ ...bundle, response: { ...response, ...part } })).message).toMatch(message);
  });
});
