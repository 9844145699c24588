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
    factorBlock: (a, stride, n) => factor(heap, a / 8, stride, n),
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

function factor(heap: Float64Array, a: number, stride: number, n: number): number {
  for (let i = 0; i < n; i++) {
    const row = a + i * stride;
    for (let j = 0; j <= i; j++) {
      const other = a + j * stride;
      const rest = heap[row + j] - dot(heap, row, other, j);
      if (j < i) {
        heap[row + j] = rest / heap[other + j];
        continue;
      }
      if (!(rest > 0 && rest < Number.POSITIVE_INFINITY)) return i;
      heap[row + j] = Math.sqrt(rest);
    }
  }
  return -1;
}

function dot(heap: Float64Array, a: number, b: number, n: number): number {
  let low = 0;
  let high = 0;
  let k = 0;
  for (; k + 1 < n; k += 2) {
    low += heap[a + k] * heap[b + k];
    high += heap[a + k + 1] * heap[b + k + 1];
  }
  const sum = low + high;
  return k < n ? sum + heap[a + k] * heap[b + k] : sum;
}

function takeRow(heap: Float64Array, to: number, from: number, factor: number, m: number): void {
  for (let j = 0; j < m; j++) heap[to + j] -= factor * heap[from + j];
}

function divideRow(heap: Float64Array, to: number, factor: number, m: number): void {
  for (let j = 0; j < m; j++) heap[to + j] /= factor;
}
