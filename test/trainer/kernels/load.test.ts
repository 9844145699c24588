/** The compiled kernels: whole, of the present sources' names, and refused when not. */
import { readFileSync } from 'node:fs';
import { expect, test } from 'vitest';
import { createKernels } from '../../../trainer/kernels/kernels.ts';
import { compile, hasSimd } from '../../../trainer/kernels/load.ts';

const file = new URL('../../../trainer/kernels/kernels.wasm', import.meta.url);
const whole = () => new Uint8Array(readFileSync(file));

test('SIMD is there and used unless plain numbers are asked for', () => {
  expect(hasSimd()).toBe(true);
  expect(createKernels(0).isSimd).toBe(true);
  expect(createKernels(0, 'scalar').isSimd).toBe(false);
});

test('a damaged file is one clear error that says what to do', () => {
  const flipped = whole();
  flipped[flipped.length >> 1]! ^= 1;
  const wrongs = [flipped, whole().subarray(0, -1), new Uint8Array(0), new Uint8Array(200), new Uint8Array(10)];
  for (const bytes of wrongs) {
    expect(() => compile(bytes, '/x/kernels.wasm')).toThrow(/\/x\/kernels\.wasm.*damaged.*npm run build/);
  }
  expect(() => compile(whole(), '/x/kernels.wasm')).not.toThrow();
});

test('sizes no memory can have are refused', () => {
  for (const bytes of [-1, Number.NaN, 2 ** 32]) expect(() => createKernels(bytes)).toThrow(/memory for the kernels/);
});
