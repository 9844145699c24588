/** Larger products of products.ts in lanes: every sum in the order of the textbook triple loop, so the same bits. */
import { createKernels, type Kernels } from '../kernels/kernels.ts';

/** Multiplications from which the copying to and fro pays. */
const LEAST_WORK = 20_000;
/** Rows of the factors taken together, which the nearer caches hold. */
const PANEL = 96;
/** Numbers of the kernels' memory; wider products go the plain way. */
const MOST = 4e6;

/** Scratch, made anew where a larger product comes: nothing in it outlives a call. */
let held: { readonly numbers: number; readonly kernels: Kernels } | null = null;

/**
 * Adds A B to a matrix where that pays; false where it does not, and nothing was done.
 *
 * shapes  out (n × m); a (n × k), or (k × n) where it is transposed; b (k × m); row-major
 * units   as the factors'
 * throws  as `createKernels`
 * source  definition
 * cost    n k m multiplications, four sums in a lane pair
 */
export function addInLanes(
  out: Float64Array,
  a: Float64Array,
  b: Float64Array,
  n: number,
  k: number,
  m: number,
  isTransposed: boolean,
): boolean {
  if (n * k * m < LEAST_WORK || n < 4 || m < 4 || k < 4 || a.length < n * k || b.length < k * m) return false;
  const rows = fours(n);
  const columns = fours(m);
  const numbers = rows * columns + PANEL * (rows + columns);
  if (numbers > MOST) return false;
  if (held === null || held.numbers < numbers) held = { numbers, kernels: createKernels(8 * numbers + 256) };
  const { kernels } = held;
  const mark = kernels.mark();
  const sums = kernels.alloc64(rows * columns);
  const left = kernels.alloc64(PANEL * rows);
  const right = kernels.alloc64(PANEL * columns);
  for (let i = 0; i < n; i++) sums.set(out.subarray(i * m, i * m + m), i * columns);
  for (let from = 0; from < k; from += PANEL) {
    const steps = Math.min(PANEL, k - from);
    for (let l = 0; l < steps; l++) {
      const at = from + l;
      if (isTransposed) left.set(a.subarray(at * n, at * n + n), l * rows);
      else for (let i = 0; i < n; i++) left[l * rows + i] = a[i * k + at];
      right.set(b.subarray(at * m, at * m + m), l * columns);
    }
    kernels.orderedProductAdd(sums, left, right, steps, rows, columns);
  }
  for (let i = 0; i < n; i++) out.set(sums.subarray(i * columns, i * columns + m), i * m);
  kernels.release(mark);
  return true;
}

function fours(n: number): number {
  return 4 * Math.ceil(n / 4);
}
