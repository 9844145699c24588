/** Kernels of both kinds, seeded arrays in their memory, and bits to compare. */
import { createKernels, type Kernels } from '../../trainer/kernels/kernels.ts';

/** Kernels with SIMD and in plain numbers, of so many bytes each. */
export function bothKernels(bytes: number): readonly [Kernels, Kernels] {
  return [createKernels(bytes), createKernels(bytes, 'scalar')];
}

/** Uniform numbers in [-1, 1) from a seed: a linear congruential sequence (Knuth's MMIX, 1999), its upper half. */
export function uniform(seed: number): () => number {
  let state = BigInt(seed) * 2n + 1n;
  return () => {
    state = BigInt.asUintN(64, state * 6364136223846793005n + 1442695040888963407n);
    return Number(state >> 32n) / 2 ** 31 - 1;
  };
}

/** Fills an array with uniform numbers. */
export function fill<T extends Float64Array | Float32Array>(array: T, seed: number): T {
  const next = uniform(seed);
  for (let i = 0; i < array.length; i++) array[i] = next();
  return array;
}

/** The bytes of an array, for a comparison to the bit. */
export function bits(array: Float64Array | Float32Array): string {
  return Buffer.from(array.buffer, array.byteOffset, array.byteLength).toString('hex');
}

/** The largest difference between two arrays. */
export function gap(a: ArrayLike<number>, b: ArrayLike<number>): number {
  if (a.length !== b.length) return Number.POSITIVE_INFINITY;
  let largest = 0;
  // A NaN on either side must not pass for no difference.
  for (let i = 0; i < a.length; i++) {
    const distance = Math.abs(a[i]! - b[i]!);
    if (!(distance <= largest)) largest = distance;
    if (Number.isNaN(largest)) return Number.POSITIVE_INFINITY;
  }
  return largest;
}
