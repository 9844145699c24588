/** The loops of assembly/fourier.ts in plain numbers; see core.ts. */
import type { FourierLoops } from './core.ts';

/**
 * The loops over one memory.
 *
 * shapes  as core.ts has them
 * units   any
 * throws  nothing
 * source  assembly/fourier.ts, lane by lane
 * cost    about half the speed of two lanes
 */
export function scalarFourier(buffer: ArrayBuffer): FourierLoops {
  const heap = new Float64Array(buffer);
  return {
    pass4: (xr, xi, yr, yi, factors, m, s) => pass4(heap, xr / 8, xi / 8, yr / 8, yi / 8, factors / 8, m, s),
    pass2: (xr, xi, yr, yi, s) => pass2(heap, xr / 8, xi / 8, yr / 8, yi / 8, s),
    split(x, re, im, n) {
      for (let k = 0; k < n; k++) {
        heap[re / 8 + k] = heap[x / 8 + 2 * k];
        heap[im / 8 + k] = heap[x / 8 + 2 * k + 1];
      }
    },
    join(x, re, im, factor, n) {
      for (let k = 0; k < n; k++) {
        heap[x / 8 + 2 * k] = heap[re / 8 + k] * factor;
        heap[x / 8 + 2 * k + 1] = heap[im / 8 + k] * factor;
      }
    },
    untangle: (re, im, factors, n) => untangle(heap, re / 8, im / 8, factors / 8, n),
    tangle: (re, im, factors, n) => tangle(heap, re / 8, im / 8, factors / 8, n),
  };
}

function pass4(
  heap: Float64Array,
  xr: number,
  xi: number,
  yr: number,
  yi: number,
  factors: number,
  m: number,
  s: number,
): void {
  const quarter = m * s;
  for (let p = 0; p < m; p++) {
    const c1 = heap[factors + p];
    const s1 = heap[factors + m + p];
    const c2 = heap[factors + 2 * m + p];
    const s2 = heap[factors + 3 * m + p];
    const c3 = heap[factors + 4 * m + p];
    const s3 = heap[factors + 5 * m + p];
    // Where m = 1 every factor is one, and the multiplications by it and by nought leave the bits as they are.
    for (let q = 0; q < s; q++) {
      const at = s * p + q;
      const out = 4 * s * p + q;
      const evenR = heap[xr + at] + heap[xr + at + 2 * quarter];
      const evenI = heap[xi + at] + heap[xi + at + 2 * quarter];
      const oddR = heap[xr + at + quarter] + heap[xr + at + 3 * quarter];
      const oddI = heap[xi + at + quarter] + heap[xi + at + 3 * quarter];
      const gapR = heap[xr + at] - heap[xr + at + 2 * quarter];
      const gapI = heap[xi + at] - heap[xi + at + 2 * quarter];
      const turnR = heap[xi + at + quarter] - heap[xi + at + 3 * quarter];
      const turnI = heap[xr + at + 3 * quarter] - heap[xr + at + quarter];
      heap[yr + out] = evenR + oddR;
      heap[yi + out] = evenI + oddI;
      const r1 = gapR + turnR;
      const i1 = gapI + turnI;
      heap[yr + out + s] = r1 * c1 - i1 * s1;
      heap[yi + out + s] = r1 * s1 + i1 * c1;
      const r2 = evenR - oddR;
      const i2 = evenI - oddI;
      heap[yr + out + 2 * s] = r2 * c2 - i2 * s2;
      heap[yi + out + 2 * s] = r2 * s2 + i2 * c2;
      const r3 = gapR - turnR;
      const i3 = gapI - turnI;
      heap[yr + out + 3 * s] = r3 * c3 - i3 * s3;
      heap[yi + out + 3 * s] = r3 * s3 + i3 * c3;
    }
  }
}

function pass2(heap: Float64Array, xr: number, xi: number, yr: number, yi: number, s: number): void {
  for (let q = 0; q < s; q++) {
    const ar = heap[xr + q];
    const ai = heap[xi + q];
    const br = heap[xr + q + s];
    const bi = heap[xi + q + s];
    heap[yr + q] = ar + br;
    heap[yi + q] = ai + bi;
    heap[yr + q + s] = ar - br;
    heap[yi + q + s] = ai - bi;
  }
}

function untangle(heap: Float64Array, re: number, im: number, factors: number, n: number): void {
  const sines = factors + (n >> 1) + 1;
  const r0 = heap[re];
  const i0 = heap[im];
  heap[re] = r0 + i0;
  heap[im] = 0;
  heap[re + n] = r0 - i0;
  heap[im + n] = 0;
  for (let k = 1; 2 * k <= n; k++) {
    const sumR = 0.5 * (heap[re + k] + heap[re + n - k]);
    const sumI = 0.5 * (heap[im + k] - heap[im + n - k]);
    const gapR = 0.5 * (heap[im + k] + heap[im + n - k]);
    const gapI = 0.5 * (heap[re + n - k] - heap[re + k]);
    const turnR = gapR * heap[factors + k] - gapI * heap[sines + k];
    const turnI = gapR * heap[sines + k] + gapI * heap[factors + k];
    heap[re + k] = sumR + turnR;
    heap[im + k] = sumI + turnI;
    heap[re + n - k] = sumR - turnR;
    heap[im + n - k] = turnI - sumI;
  }
}

function tangle(heap: Float64Array, re: number, im: number, factors: number, n: number): void {
  const sines = factors + (n >> 1) + 1;
  const first = heap[re];
  const end = heap[re + n];
  heap[re] = first + end;
  heap[im] = first - end;
  for (let k = 1; 2 * k <= n; k++) {
    const sumR = heap[re + k] + heap[re + n - k];
    const sumI = heap[im + k] - heap[im + n - k];
    const turnR = heap[re + k] - heap[re + n - k];
    const turnI = heap[im + k] + heap[im + n - k];
    const gapR = turnR * heap[factors + k] + turnI * heap[sines + k];
    const gapI = turnI * heap[factors + k] - turnR * heap[sines + k];
    heap[re + k] = sumR - gapI;
    heap[im + k] = sumI + gapR;
    heap[re + n - k] = sumR + gapI;
    heap[im + n - k] = gapR - sumI;
  }
}
