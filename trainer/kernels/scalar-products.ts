/** The loops of assembly/products.ts in plain numbers; see core.ts. */
import type { ProductLoops } from './core.ts';

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
    pack64: (to, from, rowStride, stepStride, rows, steps, width) =>
      pack(heap, to / 8, heap, from / 8, rowStride, stepStride, rows, steps, width),
    pack32: (to, from, rowStride, stepStride, rows, steps, width) =>
      pack(heap, to / 8, heap32, from / 4, rowStride, stepStride, rows, steps, width),
    panels(c, rowStride, columnStride, a, aStrip, aStep, b, rows, columns, steps, skew, isTaken) {
      const sign = isTaken ? -1 : 1;
      for (let j = 0; j < columns; j += 8) {
        for (let i = 0; i < rows; i += 2) {
          if (i + skew + 1 < j) continue;
          const inside = Math.min(8, columns - j);
          const to = c / 8 + i * rowStride + j * columnStride;
          const [left, right] = [a / 8 + (i / 2) * aStrip, b / 8 + j * steps];
          addRow(heap, to, columnStride, left, aStep, right, inside, steps, sign);
          if (i + 1 < rows) addRow(heap, to + rowStride, columnStride, left + 1, aStep, right, inside, steps, sign);
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
  width: number,
): void {
  for (let strip = 0; strip < rows; strip += width) {
    for (let t = 0; t < steps; t++) {
      const at = from + strip * rowStride + t * stepStride;
      for (let i = 0; i < width; i++) heap[to++] = strip + i < rows ? source[at + i * rowStride] : 0;
    }
  }
}

/** One row of a tile, four columns at a time: each element sums its products in order, as a lane does. */
function addRow(
  heap: Float64Array,
  to: number,
  columnStride: number,
  a: number,
  aStep: number,
  b: number,
  columns: number,
  steps: number,
  sign: number,
): void {
  for (let j = 0; j < columns; j += 4) {
    let s0 = 0;
    let s1 = 0;
    let s2 = 0;
    let s3 = 0;
    for (let t = 0, left = a, right = b + j; t < steps; t++, left += aStep, right += 8) {
      const f = heap[left];
      s0 += f * heap[right];
      s1 += f * heap[right + 1];
      s2 += f * heap[right + 2];
      s3 += f * heap[right + 3];
    }
    const at = to + j * columnStride;
    heap[at] += sign * s0;
    if (j + 1 < columns) heap[at + columnStride] += sign * s1;
    if (j + 2 < columns) heap[at + 2 * columnStride] += sign * s2;
    if (j + 3 < columns) heap[at + 3 * columnStride] += sign * s3;
  }
}
