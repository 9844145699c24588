/**
 * Eigenvalues and vectors of a small symmetric matrix in place, without allocating: called once a block of rows, where the
 * library's answer costs more than the long products beside it. Vectors are kept as rows, so that each plane rotation runs
 * over two contiguous rows. Not for matrices with entries that are not finite: the caller has refused them.
 */

/** Most sweeps for one eigenvalue; QL steps take two or three. */
const MOST_STEPS = 60;

/**
 * Diagonalises a symmetric matrix, A = Z' diag(d) Z, eigenvalues falling.
 *
 * shapes  z (n × n) symmetric on entry, rows are eigenvectors on return; d (n) eigenvalues, e (n) scratch
 * units   any
 * throws  RangeError if an eigenvalue does not settle, which happens only to entries that are not finite
 * source  Householder reduction and implicit QL: Wilkinson & Reinsch, Handbook for Automatic Computation, Linear Algebra
 *         (1971), contributions II/2 and II/4; Golub & Van Loan, Matrix Computations, 4th ed. (2013), section 8.3
 * cost    about 4 n³ multiplications
 */
export function diagonalise(z: Float64Array, n: number, d: Float64Array, e: Float64Array): void {
  tridiagonalise(z, n, d, e);
  accumulate(z, n, d);
  implicitQl(z, n, d, e);
  sortFalling(z, n, d);
}

/** Lower triangle to tridiagonal form; row i of z keeps the reflection of step i, d[i] its half square. */
function tridiagonalise(z: Float64Array, n: number, d: Float64Array, e: Float64Array): void {
  for (let i = n - 1; i > 0; i--) {
    const row = i * n;
    let scale = 0;
    for (let k = 0; k < i; k++) scale += Math.abs(z[row + k]);
    if (i === 1 || scale === 0) {
      e[i] = z[row + i - 1];
      d[i] = 0;
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
    d[i] = h;
  }
  d[0] = 0;
  e[0] = 0;
}

/** Both sides of the leading i × i block reflected by the vector in row i; e[0 … i − 1] is scratch. */
function reflect(z: Float64Array, n: number, i: number, h: number, e: Float64Array): void {
  const row = i * n;
  e.fill(0, 0, i);
  for (let j = 0; j < i; j++) {
    const at = j * n;
    const u = z[row + j];
    let sum = z[at + j] * u;
    for (let k = 0; k < j; k++) {
      sum += z[at + k] * z[row + k];
      e[k] += z[at + k] * u;
    }
    e[j] += sum;
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

/** The product of the reflections, transposed into rows; d becomes the diagonal. */
function accumulate(z: Float64Array, n: number, d: Float64Array): void {
  const diagonal = d.slice(0, n);
  const reflections = z.slice(0, n * n);
  for (let i = 0; i < n; i++) d[i] = reflections[i * n + i];
  z.fill(0, 0, n * n);
  for (let i = 0; i < n; i++) z[i * n + i] = 1;
  // Q = P(n−1) … P(1); rows of Q' are what QL turns: each reflection changes the first i columns of every row below i.
  for (let i = 1; i < n; i++) {
    const h = diagonal[i];
    if (h === 0) continue;
    const u = i * n;
    for (let j = 0; j < i; j++) {
      const at = j * n;
      // Sums of their own, since each addition would wait for the last.
      let g0 = 0;
      let g1 = 0;
      let g2 = 0;
      let g3 = 0;
      let k = 0;
      for (; k + 3 < i; k += 4) {
        g0 += z[at + k] * reflections[u + k];
        g1 += z[at + k + 1] * reflections[u + k + 1];
        g2 += z[at + k + 2] * reflections[u + k + 2];
        g3 += z[at + k + 3] * reflections[u + k + 3];
      }
      for (; k < i; k++) g0 += z[at + k] * reflections[u + k];
      const g = (g0 + g1 + (g2 + g3)) / h;
      for (k = 0; k < i; k++) z[at + k] -= g * reflections[u + k];
    }
  }
}

function implicitQl(z: Float64Array, n: number, d: Float64Array, e: Float64Array): void {
  const turns = new Float64Array(2 * n);
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
      if (step === MOST_STEPS) throw new RangeError('an eigenvalue of a small matrix did not settle');
      turnRows(z, n, sweep(d, e, l, m, turns), m, turns);
    }
  }
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

/** Falling order; rows change places with their values. */
function sortFalling(z: Float64Array, n: number, d: Float64Array): void {
  for (let i = 0; i < n - 1; i++) {
    let k = i;
    for (let j = i + 1; j < n; j++) if (d[j] > d[k]) k = j;
    if (k === i) continue;
    [d[i], d[k]] = [d[k], d[i]];
    for (let c = 0; c < n; c++) {
      const held = z[i * n + c];
      z[i * n + c] = z[k * n + c];
      z[k * n + c] = held;
    }
  }
}
