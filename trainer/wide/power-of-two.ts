/** Lengths that a Walsh-Hadamard transform can have. */

/** Least power of two that is n or more. */
export function powerOfTwo(n: number): number {
  return 2 ** Math.ceil(Math.log2(n));
}
