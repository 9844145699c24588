/**
 * Dense products, factors, solves and transforms at the speed of the machine's vector lanes, on arrays that live in one
 * memory of a fixed size. Loops are WebAssembly with SIMD; where the machine has none, or on request, the same loops in
 * plain numbers give the same bits. For matrices of a few dozen rows the functions of trainer/linalg do as well.
 */
import { Arena } from './arena.ts';
import type { Core } from './core.ts';
import type { Kernels } from './kernel-functions.ts';
import { hasSimd, loadCore } from './load.ts';
import { MemoryKernels, OWN_BYTES } from './memory-kernels.ts';
import { scalarFourier } from './scalar-fourier.ts';
import { scalarProducts } from './scalar-products.ts';
import { scalarShifts } from './scalar-shifts.ts';
import { scalarSymmetric } from './scalar-symmetric.ts';
import { scalarTriangular } from './scalar-triangular.ts';
import { scalarVectors } from './scalar-vectors.ts';
import { type WasmMemory, webAssembly } from './web-assembly.ts';

export type { Kernels, Numbers } from './kernel-functions.ts';

/**
 * Makes kernels with `bytes` of memory for arrays, scratch and tables. It never grows, so views stay valid.
 *
 * shapes  bytes: 0 to 4 GiB; the panels of products are on top of it
 * units   bytes
 * throws  TrainError 'file' where the compiled kernels are missing or damaged; RangeError for a size no memory can have or the
 *         machine has not
 * source  this project's assembly/
 * cost    the memory is touched only as it is used
 */
export function createKernels(bytes: number, mode: 'simd' | 'scalar' = 'simd'): Kernels {
  const pages = Arena.pages(bytes, OWN_BYTES);
  const isSimd = mode === 'simd' && hasSimd();
  if (!isSimd) {
    const buffer = new ArrayBuffer(pages * 65_536);
    return new MemoryKernels(false, scalarCore(buffer), new Arena(buffer));
  }
  const memory = openMemory(pages);
  return new MemoryKernels(true, loadCore(memory), new Arena(memory.buffer));
}

function openMemory(pages: number): WasmMemory {
  try {
    return new webAssembly!.Memory({ initial: pages, maximum: pages });
  } catch (cause) {
    const megabytes = Math.ceil(pages / 16);
    throw new RangeError(`The machine has no ${megabytes} MB of memory for the kernels; free some or ask for less.`, {
      cause,
    });
  }
}

function scalarCore(buffer: ArrayBuffer): Core {
  return {
    ...scalarProducts(buffer),
    ...scalarTriangular(buffer),
    ...scalarFourier(buffer),
    ...scalarVectors(buffer),
    ...scalarSymmetric(buffer),
    ...scalarShifts(buffer),
  };
}
