/** The loops of assembly/vectors.ts and assembly/hadamard.ts in plain numbers; see core.ts. */
import type { ThinLoops, VectorLoops } from './core.ts';
import { cosine32 } from './cosines.ts';

/**
 * The loops over one memory.
 *
 * shapes  as core.ts has them
 * units   any
 * throws  nothing
 * source  assembly/vectors.ts and assembly/hadamard.ts, lane by lane
 * cost    half to a quarter of the speed of the lanes
 */
export function scalarVectors(buffer: ArrayBuffer): VectorLoops & ThinLoops {
  const heap = new Float64Array(buffer);
  const heap32 = new Float32Array(buffer);
  return {
    dot64: (a, b, n) => dot(heap, a / 8, b / 8, n),
    columnSums(c, a, stride, x, m, steps, isTaken) {
      for (let j = 0; j < m; j++) {
        let sum = 0;
        for (let t = 0; t < steps; t++) sum += heap[a / 8 + t * stride + j] * heap[x / 8 + t];
        heap[c / 8 + j] += isTaken ? -sum : sum;
      }
    },
    rowDots(c, cStride, a, stride, x, rows, m, isTaken) {
      for (let i = 0; i < rows; i++) {
        const sum = dot(heap, a / 8 + i * stride, x / 8, m);
        heap[c / 8 + i * cStride] += isTaken ? -sum : sum;
      }
    },
    axpy64(y, factor, x, n) {
      for (let k = 0; k < n; k++) heap[y / 8 + k] += factor * heap[x / 8 + k];
    },
    scale64(x, factor, n) {
      for (let k = 0; k < n; k++) heap[x / 8 + k] *= factor;
    },
    spectraAdd64(cr, ci, ar, ai, br, bi, n) {
      for (let k = 0; k < n; k++) {
        const xr = heap[ar / 8 + k];
        const xi = heap[ai / 8 + k];
        const yr = heap[br / 8 + k];
        const yi = heap[bi / 8 + k];
        heap[cr / 8 + k] += xr * yr + xi * yi;
        heap[ci / 8 + k] += xr * yi - xi * yr;
      }
    },
    cosines32(x, factor, n) {
      const f = Math.fround(factor);
      for (let k = x / 4; k < x / 4 + n; k++) heap32[k] = f * cosine32(heap32[k]);
    },
    hadamard64: (x, n) => hadamard(heap, x / 8, n),
    hadamard32: (x, n) => hadamard(heap32, x / 4, n),
  };
}

function dot(heap: Float64Array, a: number, b: number, n: number): number {
  let s0 = 0;
  let s1 = 0;
  let s2 = 0;
  let s3 = 0;
  let s4 = 0;
  let s5 = 0;
  let s6 = 0;
  let s7 = 0;
  let k = 0;
  for (; k + 7 < n; k += 8) {
    s0 += heap[a + k] * heap[b + k];
    s1 += heap[a + k + 1] * heap[b + k + 1];
    s2 += heap[a + k + 2] * heap[b + k + 2];
    s3 += heap[a + k + 3] * heap[b + k + 3];
    s4 += heap[a + k + 4] * heap[b + k + 4];
    s5 += heap[a + k + 5] * heap[b + k + 5];
    s6 += heap[a + k + 6] * heap[b + k + 6];
    s7 += heap[a + k + 7] * heap[b + k + 7];
  }
  let sum = s0 + s2 + (s4 + s6) + (s1 + s3 + (s5 + s7));
  for (; k < n; k++) sum += heap[a + k] * heap[b + k];
  return sum;
}

function hadamard(x: Float64Array | Float32Array, from: number, n: number): void {
  for (let half = 1; half < n; half *= 2) {
    for (let block = from; block < from + n; block += 2 * half) {
      for (let k = block; k < block + half; k++) {
        const a = x[k];
        const b = x[k + half];
        x[k] = a + b;
        x[k + half] = a - b;
      }
    }
  }
}
