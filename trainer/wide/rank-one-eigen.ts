/**
 * Eigenvalues and vectors of a diagonal matrix plus one outer product, diag(d) + z z': what one new row makes of a small
 * problem that is already diagonal. In squares of the size instead of cubes, so that rows can be taken one at a time.
 */

const MOST_STEPS = 80;

/** Buffers of one size, used again for every row. */
export class RankOneEigen {
  /** (n) falling after `solve`. */
  readonly values: Float64Array;
  /** (n × n) row-major after `solve`: rows are eigenvectors. */
  readonly vectors: Float64Array;
  readonly #d: Float64Array;
  readonly #z: Float64Array;
  /** Which entries take part; the others are eigenvalues already. */
  readonly #active: Int32Array;
  /** (active × active) pole k less root i, exact to rounding. */
  readonly #gap: Float64Array;
  /** Plane rotations that made a pair of equal poles one. */
  readonly #pairs: { first: number; second: number; c: number; s: number }[] = [];

  constructor(n: number) {
    this.values = new Float64Array(n);
    this.vectors = new Float64Array(n * n);
    this.#d = new Float64Array(n);
    this.#z = new Float64Array(n);
    this.#active = new Int32Array(n);
    this.#gap = new Float64Array(n * n);
  }

  /**
   * Solves for the first `n` entries.
   *
   * shapes  d (n) falling, z (n); values (n), vectors (n × n)
   * units   d in squares of z
   * throws  nothing; entries must be finite
   * source  Golub, SIAM Review 15 (1973), section 5; vectors from recomputed z by Gu & Eisenstat, SIAM Journal on Matrix
   *         Analysis and Applications 15 (1994); deflation as by Dongarra & Sorensen, SIAM Journal on Scientific and
   *         Statistical Computing 8 (1987)
   * cost    O(n²) a few dozen times for values, n² for vectors
   */
  solve(d: Float64Array, z: Float64Array, n: number): void {
    const count = this.#deflate(d, z, n);
    this.vectors.fill(0, 0, n * n);
    for (let k = 0; k < n; k++) this.values[k] = this.#d[k];
    for (let i = 0; i < count; i++) this.#root(i, count);
    this.#vectorsOf(count, n);
    for (let p = this.#pairs.length - 1; p >= 0; p--) this.#turnBack(n, this.#pairs[p]);
    this.#sort(n);
  }

  /** Leaves out entries that z hardly touches, and makes one of poles that hardly differ; gives how many are left. */
  #deflate(d: Float64Array, z: Float64Array, n: number): number {
    const [dd, zz] = [this.#d, this.#z];
    this.#pairs.length = 0;
    let largest = 0;
    let square = 0;
    for (let k = 0; k < n; k++) {
      dd[k] = d[k];
      zz[k] = z[k];
      largest = Math.max(largest, Math.abs(d[k]));
      square += z[k] * z[k];
    }
    const slack = 8 * Number.EPSILON * Math.max(largest, square);
    const size = Math.sqrt(square);
    let count = 0;
    let last = -1;
    for (let k = 0; k < n; k++) {
      if (Math.abs(zz[k]) * size <= slack) continue;
      if (last >= 0 && dd[last] - dd[k] <= slack) {
        const length = Math.hypot(zz[last], zz[k]);
        this.#pairs.push({ first: last, second: k, c: zz[last] / length, s: zz[k] / length });
        zz[last] = length;
        zz[k] = 0;
        continue;
      }
      this.#active[count++] = k;
      last = k;
    }
    return count;
  }

  /**
   * Root i of 1 + Σ z²/(d − λ): between pole i and the pole above it (none above the first). Kept as its distance from the
   * nearer pole, so that gaps are exact; Newton steps on the reciprocal within a bracket that halves where they fail.
   */
  #root(i: number, count: number): void {
    const [d, z, active, gap] = [this.#d, this.#z, this.#active, this.#gap];
    const here = d[active[i]];
    let width: number;
    if (i === 0) {
      width = 0;
      for (let k = 0; k < count; k++) width += z[active[k]] ** 2;
    } else width = d[active[i - 1]] - here;
    const isUpper = i > 0 && this.#secular(here, 0.5 * width, count) < 0;
    const from = isUpper ? i - 1 : i;
    const origin = d[active[from]];
    let [low, high] = i === 0 ? [0, width] : isUpper ? [-0.5 * width, 0] : [0, 0.5 * width];
    let x = 0.5 * (low + high);
    for (let step = 0; step < MOST_STEPS; step++) {
      const next = this.#next(origin, x, i, count);
      const f = this.#value;
      if (f < 0) low = x;
      else high = x;
      const inside = next > low && next < high ? next : 0.5 * (low + high);
      const isSettled = Math.abs(inside - x) <= 2 * Number.EPSILON * Math.abs(inside) || f === 0;
      if (f !== 0) x = inside;
      if (isSettled || !(high > low)) break;
    }
    for (let k = 0; k < count; k++) gap[i * count + k] = d[active[k]] - origin - x;
    this.values[active[i]] = origin + x;
  }

  #value = 0;

  #secular(origin: number, x: number, count: number): number {
    let f = 1;
    for (let k = 0; k < count; k++) {
      const at = this.#active[k];
      f += this.#z[at] ** 2 / (this.#d[at] - origin - x);
    }
    return f;
  }

  /**
   * Next guess: poles above and below the root each made one pole that agrees in value and slope ("middle way" of Li, LAPACK
   * Working Note 89, 1993), whose root is that of a quadratic.
   */
  #next(origin: number, x: number, i: number, count: number): number {
    const [d, z, active] = [this.#d, this.#z, this.#active];
    let above = 0;
    let aboveSlope = 0;
    let below = 0;
    let belowSlope = 0;
    for (let k = 0; k < count; k++) {
      const at = active[k];
      const t = z[at] / (d[at] - origin - x);
      if (k < i) {
        above += z[at] * t;
        aboveSlope += t * t;
      } else {
        below += z[at] * t;
        belowSlope += t * t;
      }
    }
    const f = 1 + above + below;
    this.#value = f;
    const lowGap = d[active[i]] - origin - x;
    if (i === 0) {
      // One pole below: c + s/(gap − η) = 0.
      const s = belowSlope * lowGap * lowGap;
      const c = f - belowSlope * lowGap;
      return c > 0 ? x + lowGap + s / c : Number.NaN;
    }
    const highGap = d[active[i - 1]] - origin - x;
    const c = f - lowGap * belowSlope - highGap * aboveSlope;
    const a = (lowGap + highGap) * f - lowGap * highGap * (aboveSlope + belowSlope);
    const b = lowGap * highGap * f;
    const root = Math.sqrt(Math.max(0, a * a - 4 * b * c));
    return x + (a <= 0 ? (a - root) / (2 * c) : (2 * b) / (a + root));
  }

  /** z recomputed from the roots, so that vectors are orthogonal however close roots are; then the vectors. */
  #vectorsOf(count: number, n: number): void {
    const [d, z, active, gap, vectors] = [this.#d, this.#z, this.#active, this.#gap, this.vectors];
    for (let k = 0; k < n; k++) vectors[k * n + k] = 1;
    for (let k = 0; k < count; k++) {
      let square = -gap[k * count + k];
      for (let i = 0; i < count; i++) {
        if (i !== k) square *= gap[i * count + k] / (d[active[k]] - d[active[i]]);
      }
      const value = Math.sqrt(Math.max(0, square));
      z[active[k]] = z[active[k]] < 0 ? -value : value;
    }
    for (let i = 0; i < count; i++) {
      const row = active[i] * n;
      let square = 0;
      for (let k = 0; k < count; k++) {
        const entry = z[active[k]] / gap[i * count + k];
        vectors[row + active[k]] = entry;
        square += entry * entry;
      }
      const scale = 1 / Math.sqrt(square);
      for (let k = 0; k < count; k++) vectors[row + active[k]] *= scale;
    }
  }

  #turnBack(n: number, { first, second, c, s }: { first: number; second: number; c: number; s: number }): void {
    for (let row = 0; row < n; row++) {
      const a = this.vectors[row * n + first];
      const b = this.vectors[row * n + second];
      this.vectors[row * n + first] = c * a - s * b;
      this.vectors[row * n + second] = s * a + c * b;
    }
  }

  /** Falling; they nearly are, so each moves a few places at most. */
  #sort(n: number): void {
    const [values, vectors] = [this.values, this.vectors];
    for (let i = 1; i < n; i++) {
      for (let j = i; j > 0 && values[j] > values[j - 1]; j--) {
        const held = values[j];
        values[j] = values[j - 1];
        values[j - 1] = held;
        for (let c = 0; c < n; c++) {
          const entry = vectors[j * n + c];
          vectors[j * n + c] = vectors[(j - 1) * n + c];
          vectors[(j - 1) * n + c] = entry;
        }
      }
    }
  }
}
