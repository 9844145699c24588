/** The compiled kernels: whole, used where SIMD is there, and refused when missing or damaged. */
import { readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { expect, test } from 'vitest';
import { createKernels } from '../../../trainer/kernels/kernels.ts';
import { hasSimd, openModule } from '../../../trainer/kernels/load.ts';
import { testFolder } from '../../support/folder.ts';

const built = fileURLToPath(new URL('../../../trainer/kernels/kernels.wasm', import.meta.url));

test('SIMD is there and used unless plain numbers are asked for', () => {
  expect(hasSimd()).toBe(true);
  expect(createKernels(0).isSimd).toBe(true);
  expect(createKernels(0, 'scalar').isSimd).toBe(false);
});

test('a damaged or missing file is one clear error that says what to do', () => {
  const whole = new Uint8Array(readFileSync(built));
  const flipped = whole.slice();
  flipped[flipped.length >> 1]! ^= 1;
  const wrongs = [flipped, whole.subarray(0, -1), new Uint8Array(0), new Uint8Array(200), new Uint8Array(10)];
  const path = join(testFolder(), 'kernels.wasm');
  expect(() => openModule(path)).toThrow(/kernels\.wasm.*cannot be read.*npm run build/);
  for (const bytes of wrongs) {
    writeFileSync(path, bytes);
    expect(() => openModule(path)).toThrow(/kernels\.wasm.*damaged.*npm run build/);
  }
  writeFileSync(path, whole);
  expect(() => openModule(path)).not.toThrow();
});

test('sizes no memory can have are refused', () => {
  for (const bytes of [-1, Number.NaN, 2 ** 32]) expect(() => createKernels(bytes)).toThrow(/memory for the kernels/);
});
