/** The loops of assembly/symmetric.ts in plain numbers; see core.ts. */
import type { SymmetricLoops } from './core.ts';

/** Most steps for one eigenvalue; two or three are usual. */
const MOST_STEPS = 60;

/**
 * The loops over one memory.
 *
 * shapes  as core.ts has them
 * units   any
 * throws  nothing
 * source  assembly/symmetric.ts, lane by lane
 * cost    about 4 n³ multiplications, half the speed of the lanes
 */
export function scalarSymmetric(buffer: ArrayBuffer): SymmetricLoops {
  return {
    diagonalise64(zAt, dAt, workAt, n) {
      const z = new Float64Array(buffer, zAt, n * n);
      const d = new Float64Array(buffer, dAt, n);
      const work = new Float64Array(buffer, workAt, n * (n + 4));
      const e = work.subarray(0, n);
      const turns = work.subarray(n, 3 * n);
      const halves = work.subarray(3 * n, 4 * n);
      const kept = work.subarray(4 * n);
      tridiagonalise(z, n, halves, e);
      for (let i = 0; i < n; i++) d[i] = z[i * n + i];
      kept.set(z);
      accumulate(z, kept, n, halves);
      return implicitQl(z, n, d, e, turns);
    },
  };
}

function tridiagonalise(z: Float64Array, n: number, halves: Float64Array, e: Float64Array): void {
  for (let i = n - 1; i > 0; i--) {
    const row = i * n;
    let scale = 0;
    for (let k = 0; k < i; k++) scale += Math.abs(z[row + k]);
    if (i === 1 || scale === 0) {
      e[i] = z[row + i - 1];
      halves[i] = 0;
      continue;
    }
    let h = 0;
    for (let k = 0; k < i; k++) {
      z[row + k] /= scale;
      h += z[row + k] * z[row + k];
    }
    const f = z[row + i - 1];
    const g = f >= 0 ? -Math.sqrt(h) : Math.sqrt(h);
    e[i] = scale * g;
    h -= f * g;
    z[row + i - 1] = f - g;
    reflect(z, n, i, h, e);
    halves[i] = h;
  }
  halves[0] = 0;
  e[0] = 0;
}

/** Both sides of the leading i × i block reflected by the vector in row i; e[0 … i − 1] is scratch. */
function reflect(z: Float64Array, n: number, i: number, h: number, e: Float64Array): void {
  const row = i * n;
  e.fill(0, 0, i);
  for (let j = 0; j < i; j++) {
    const at = j * n;
    const u = z[row + j];
    let s0 = 0;
    let s1 = 0;
    let k = 0;
    for (; k + 1 < j; k += 2) {
      s0 += z[at + k] * z[row + k];
      s1 += z[at + k + 1] * z[row + k + 1];
      e[k] += z[at + k] * u;
      e[k + 1] += z[at + k + 1] * u;
    }
    let sum = s0 + s1;
    if (k < j) {
      sum += z[at + k] * z[row + k];
      e[k] += z[at + k] * u;
    }
    e[j] += sum + z[at + j] * u;
  }
  let f = 0;
  for (let j = 0; j < i; j++) {
    e[j] /= h;
    f += e[j] * z[row + j];
  }
  const half = f / (h + h);
  for (let j = 0; j < i; j++) e[j] -= half * z[row + j];
  for (let j = 0; j < i; j++) {
    const at = j * n;
    const u = z[row + j];
    const v = e[j];
    for (let k = 0; k <= j; k++) z[at + k] -= u * e[k] + v * z[row + k];
  }
}

/** The product of the reflections, transposed into rows. */
function accumulate(z: Float64Array, kept: Float64Array, n: number, halves: Float64Array): void {
  z.fill(0);
  for (let i = 0; i < n; i++) z[i * n + i] = 1;
  for (let i = 1; i < n; i++) {
    if (halves[i] === 0) continue;
    for (let j = 0; j < i; j++) reflectRow(z, j * n, kept, i * n, halves[i], i);
  }
}

function reflectRow(z: Float64Array, at: number, kept: Float64Array, u: number, h: number, n: number): void {
  let s0 = 0;
  let s1 = 0;
  let s2 = 0;
  let s3 = 0;
  let k = 0;
  for (; k + 3 < n; k += 4) {
    s0 += z[at + k] * kept[u + k];
    s1 += z[at + k + 1] * kept[u + k + 1];
    s2 += z[at + k + 2] * kept[u + k + 2];
    s3 += z[at + k + 3] * kept[u + k + 3];
  }
  let sum = s0 + s2 + (s1 + s3);
  for (; k < n; k++) sum += z[at + k] * kept[u + k];
  const g = sum / h;
  for (k = 0; k < n; k++) z[at + k] -= g * kept[u + k];
}

function implicitQl(z: Float64Array, n: number, d: Float64Array, e: Float64Array, turns: Float64Array): number {
  for (let i = 1; i < n; i++) e[i - 1] = e[i];
  e[n - 1] = 0;
  for (let l = 0; l < n; l++) {
    for (let step = 0; ; step++) {
      let m = l;
      for (; m < n - 1; m++) {
        const size = Math.abs(d[m]) + Math.abs(d[m + 1]);
        if (Math.abs(e[m]) <= Number.EPSILON * size) break;
      }
      if (m === l) break;
      if (step === MOST_STEPS) return 1;
      turnRows(z, n, sweep(d, e, l, m, turns), m, turns);
    }
  }
  return 0;
}

/** One implicit QL step on rows l … m; turns hold cosine and sine of rows i and i + 1, and the last i is given back. */
function sweep(d: Float64Array, e: Float64Array, l: number, m: number, turns: Float64Array): number {
  let g = (d[l + 1] - d[l]) / (2 * e[l]);
  let r = Math.sqrt(g * g + 1);
  g = d[m] - d[l] + e[l] / (g + (g >= 0 ? r : -r));
  let s = 1;
  let c = 1;
  let p = 0;
  for (let i = m - 1; i >= l; i--) {
    const f = s * e[i];
    const b = c * e[i];
    r = Math.sqrt(f * f + g * g);
    e[i + 1] = r;
    if (r === 0) {
      d[i + 1] -= p;
      e[m] = 0;
      return i + 1;
    }
    s = f / r;
    c = g / r;
    g = d[i + 1] - p;
    r = (d[i] - g) * s + 2 * c * b;
    p = s * r;
    d[i + 1] = g + p;
    g = c * r - b;
    turns[2 * i] = c;
    turns[2 * i + 1] = s;
  }
  d[l] -= p;
  e[l] = g;
  e[m] = 0;
  return l;
}

/**
 * Rows m … l turned into each other, pair by pair. Four columns at a time go through all turns, since what one turn leaves
 * in its lower row the next one takes up: each number is read and written once.
 */
function turnRows(z: Float64Array, n: number, l: number, m: number, turns: Float64Array): void {
  let k = 0;
  for (; k + 3 < n; k += 4) {
    let at = m * n + k;
    let a = z[at];
    let b = z[at + 1];
    let c = z[at + 2];
    let d = z[at + 3];
    for (let i = m - 1; i >= l; i--, at -= n) {
      const cos = turns[2 * i];
      const sin = turns[2 * i + 1];
      const p = z[at - n];
      const q = z[at - n + 1];
      const r = z[at - n + 2];
      const s = z[at - n + 3];
      z[at] = sin * p + cos * a;
      z[at + 1] = sin * q + cos * b;
      z[at + 2] = sin * r + cos * c;
      z[at + 3] = sin * s + cos * d;
      a = cos * p - sin * a;
      b = cos * q - sin * b;
      c = cos * r - sin * c;
      d = cos * s - sin * d;
    }
    z[at] = a;
    z[at + 1] = b;
    z[at + 2] = c;
    z[at + 3] = d;
  }
  for (; k < n; k++) {
    let at = m * n + k;
    let a = z[at];
    for (let i = m - 1; i >= l; i--, at -= n) {
      const p = z[at - n];
      z[at] = turns[2 * i + 1] * p + turns[2 * i] * a;
      a = turns[2 * i] * p - turns[2 * i + 1] * a;
    }
    z[at] = a;
  }
}
