/** The loops of assembly/products.ts in plain numbers; see core.ts. */
import type { Pointer, ProductLoops } from './core.ts';

/**
 * The loops over one memory.
 *
 * shapes  as core.ts has them
 * units   any
 * throws  nothing
 * source  assembly/products.ts, lane by lane
 * cost    about a third of the speed of two lanes
 */
export function scalarProducts(buffer: ArrayBuffer): ProductLoops {
  const heap = new Float64Array(buffer);
  const heap32 = new Float32Array(buffer);
  return {
    pack64: (to, from, rowStride, stepStride, rows, steps) =>
      pack(heap, to / 8, heap, from / 8, rowStride, stepStride, rows, steps),
    pack32: (to, from, rowStride, stepStride, rows, steps) =>
      pack(heap, to / 8, heap32, from / 4, rowStride, stepStride, rows, steps),
    panels(c, stride, a, b, rows, columns, steps, skew, isTaken) {
      for (let j = 0; j < columns; j += 4) {
        for (let i = 0; i < rows; i += 4) {
          if (i + skew + 3 < j) continue;
          const to = c + 8 * (i * stride + j);
          tile(heap, to, stride, a + 8 * i * steps, b + 8 * j * steps, rows - i, columns - j, steps, isTaken);
        }
      }
    },
  };
}

function pack(
  heap: Float64Array,
  to: number,
  source: Float64Array | Float32Array,
  from: number,
  rowStride: number,
  stepStride: number,
  rows: number,
  steps: number,
): void {
  for (let strip = 0; strip < rows; strip += 4) {
    for (let t = 0; t < steps; t++) {
      const at = from + strip * rowStride + t * stepStride;
      for (let i = 0; i < 4; i++) heap[to++] = strip + i < rows ? source[at + i * rowStride] : 0;
    }
  }
}

/** Four rows of one column at a time: each element sums its products in order, as a lane does. */
function tile(
  heap: Float64Array,
  c: Pointer,
  stride: number,
  a: Pointer,
  b: Pointer,
  rows: number,
  columns: number,
  steps: number,
  isTaken: number,
): void {
  const to = c / 8;
  const sign = isTaken ? -1 : 1;
  for (let j = 0; j < 4 && j < columns; j++) {
    let s0 = 0;
    let s1 = 0;
    let s2 = 0;
    let s3 = 0;
    let left = a / 8;
    let right = b / 8 + j;
    for (let t = 0; t < steps; t++, left += 4, right += 4) {
      const y = heap[right];
      s0 += heap[left] * y;
      s1 += heap[left + 1] * y;
      s2 += heap[left + 2] * y;
      s3 += heap[left + 3] * y;
    }
    heap[to + j] += sign * s0;
    if (rows > 1) heap[to + stride + j] += sign * s1;
    if (rows > 2) heap[to + 2 * stride + j] += sign * s2;
    if (rows > 3) heap[to + 3 * stride + j] += sign * s3;
  }
}
