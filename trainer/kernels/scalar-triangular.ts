/** The loops of assembly/triangular.ts in plain numbers; see core.ts. */
import type { TriangularLoops } from './core.ts';

/**
 * The loops over one memory.
 *
 * shapes  as core.ts has them
 * units   any
 * throws  nothing
 * source  assembly/triangular.ts, lane by lane
 * cost    about a third of the speed of two lanes
 */
export function scalarTriangular(buffer: ArrayBuffer): TriangularLoops {
  const heap = new Float64Array(buffer);
  return {
    factorBlock: (a, stride, n, upper) => factor(heap, a / 8, stride, n, upper / 8),
    lowerBlock(l, lStride, b, bStride, n, m) {
      for (let i = 0; i < n; i++) {
        const to = b / 8 + i * bStride;
        const row = l / 8 + i * lStride;
        for (let k = 0; k < i; k++) takeRow(heap, to, b / 8 + k * bStride, heap[row + k], m);
        divideRow(heap, to, heap[row + i], m);
      }
    },
    upperBlock(l, lStride, b, bStride, n, m) {
      for (let i = n - 1; i >= 0; i--) {
        const to = b / 8 + i * bStride;
        const column = l / 8 + i;
        for (let k = i + 1; k < n; k++) takeRow(heap, to, b / 8 + k * bStride, heap[column + k * lStride], m);
        divideRow(heap, to, heap[column + i * lStride], m);
      }
    },
    rightBlock(r, rStride, a, aStride, n, rows) {
      for (let i = 0; i < rows; i++) {
        for (let k = 0; k < n; k++) {
          const pivot = r / 8 + k * rStride + k;
          const at = a / 8 + i * aStride + k;
          heap[at] /= heap[pivot];
          takeRow(heap, at + 1, pivot + 1, heap[at], n - k - 1);
        }
      }
    },
  };
}

function factor(heap: Float64Array, a: number, stride: number, n: number, upper: number): number {
  for (let i = 0; i < n; i++) for (let j = 0; j <= i; j++) heap[upper + j * n + i] = heap[a + i * stride + j];
  for (let k = 0; k < n; k++) {
    const row = upper + k * n;
    if (!(heap[row + k] > 0 && heap[row + k] < Number.POSITIVE_INFINITY)) return k;
    heap[row + k] = Math.sqrt(heap[row + k]);
    divideRow(heap, row + k + 1, heap[row + k], n - k - 1);
    for (let i = k + 1; i < n; i++) takeRow(heap, upper + i * n + i, row + i, heap[row + i], n - i);
  }
  for (let i = 0; i < n; i++) for (let j = 0; j <= i; j++) heap[a + i * stride + j] = heap[upper + j * n + i];
  return -1;
}

function takeRow(heap: Float64Array, to: number, from: number, factor: number, m: number): void {
  for (let j = 0; j < m; j++) heap[to + j] -= factor * heap[from + j];
}

function divideRow(heap: Float64Array, to: number, factor: number, m: number): void {
  for (let j = 0; j < m; j++) heap[to + j] /= factor;
}
