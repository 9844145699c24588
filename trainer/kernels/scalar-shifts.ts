/** The loops of assembly/shifts.ts in plain numbers; see core.ts. */
import type { ShiftLoops } from './core.ts';

/**
 * The loops over one memory.
 *
 * shapes  as core.ts has them
 * units   any
 * throws  nothing
 * source  assembly/shifts.ts, sum by sum
 * cost    half to a quarter of the speed of the lanes
 */
export function scalarShifts(buffer: ArrayBuffer): ShiftLoops {
  const heap = new Float64Array(buffer);
  return {
    shiftedDots64(sums, a, b, n, shifts) {
      for (let k = 0; k < shifts; k++) addFourSums(heap, sums / 8 + 4 * k, a / 8, b / 8 + k, n);
    },
    pairedDots64(sums, x, stride, rows, n) {
      for (let a = 0, to = sums / 8; a < rows; a++) {
        for (let b = 0; b <= a; b++, to += 4) addFourSums(heap, to, x / 8 + a * stride, x / 8 + b * stride, n);
      }
    },
    carryForward64(rows, rowStride, from, re, im, own, real, n, changes, steps) {
      const [x, y, z] = [re / 8, im / 8, own / 8];
      let last = from / 8;
      let row = rows / 8;
      for (let t = 0; t < steps; t++, last = row, row += rowStride) {
        const change = heap[changes / 8 + t];
        for (let k = 0; k < real; k++) heap[row + k] = heap[x + k] * heap[last + k] + heap[z + k] * change;
        for (let k = real; k < n; k += 2) {
          const f = heap[last + k];
          const g = heap[last + k + 1];
          heap[row + k] = heap[x + k] * f + heap[y + k] * g + heap[z + k] * change;
          heap[row + k + 1] = heap[x + k + 1] * g + heap[y + k + 1] * f + heap[z + k + 1] * change;
        }
      }
    },
    orderedProducts64(c, a, b, m, n, steps) {
      for (let i = 0; i < m; i++) {
        for (let j = 0; j < n; j++) {
          let sum = heap[c / 8 + i * n + j];
          for (let t = 0; t < steps; t++) sum += heap[a / 8 + t * m + i] * heap[b / 8 + t * n + j];
          heap[c / 8 + i * n + j] = sum;
        }
      }
    },
  };
}

function addFourSums(heap: Float64Array, sums: number, a: number, b: number, n: number): void {
  let s0 = heap[sums];
  let s1 = heap[sums + 1];
  let s2 = heap[sums + 2];
  let s3 = heap[sums + 3];
  for (let t = 0; t < n; t += 4) {
    s0 += heap[a + t] * heap[b + t];
    s1 += heap[a + t + 1] * heap[b + t + 1];
    s2 += heap[a + t + 2] * heap[b + t + 2];
    s3 += heap[a + t + 3] * heap[b + t + 3];
  }
  heap[sums] = s0;
  heap[sums + 1] = s1;
  heap[sums + 2] = s2;
  heap[sums + 3] = s3;
}
