/**
 * Products of two channels' changes and levels over the origins t = 1..T of all runs, T a horizon before a run's last tick
 * n - 1, at any distances: Σ w(t) P_c(t - m) Q_d(t + k), each of P and Q a change D or a level u, less its round where there
 * is one. What the factors hold are sums over all ticks of the runs; a sum over the origins lacks the runs' first and last
 * few, which their heads and ends tell.
 *
 * With s the later of the two ticks, q = m + k >= 0 apart, and β how much more a tick weighs than the one before it:
 *   DD(q) = Σ D_i(s) D_j(s - q)                 as kept
 *   Du(q) = Σ D_i(s) u_j(s - q)                 Du(q + 1) = Du(q) - DD(q)
 *   uD(q) = Σ u_i(s) D_j(s - q)                 uD(q) = DD(q) + β (uD(q - 1) - its last tick)
 *   uu(q) = Σ u_i(s) u_j(s - q)                 uu(q + 1) = uu(q) - uD(q)
 * since before a run's first tick, 0, every channel stood still.
 */
import type { Factors, RunEnd } from './factors.ts';
import type { LagGrid } from './lag-grid.ts';

/** What stands in a product. */
export type Kind = 'change' | 'level';

/** How the origins and what is taken away are set. */
export interface SumsShape {
  readonly factors: Factors;
  readonly grid: LagGrid;
  readonly horizon: number;
  /** Ticks of the round; 0: none. */
  readonly round: number;
  /** (nc) its weights. */
  readonly roundWeights: Float64Array;
  /** How much more a tick weighs than the one before it. */
  readonly growth: number;
  /** Furthest distance asked for, back or ahead. */
  readonly furthest: number;
}

/** The last ticks of one run, by age. */
export interface Path {
  readonly end: RunEnd;
  /** (nc) of (furthest): changes and levels at n - 1 - age. */
  readonly changes: readonly Float64Array[];
  readonly levels: readonly Float64Array[];
}

/**
 * The runs' last ticks.
 *
 * shapes  (runs) of (nc) of (length)
 * units   raw
 * throws  nothing
 * source  levels from the last one backwards
 * cost    O(runs nc length)
 */
export function pathsOf({ ends, names }: Factors, grid: LagGrid, length: number): Path[] {
  const places = grid.lags.length;
  return ends.map((end) => {
    const changes = names.map((_, c) => end.changes.slice(c * places, c * places + Math.min(length, grid.dense)));
    const levels = changes.map((change, c) => {
      const out = new Float64Array(change.length);
      let level = end.level[c];
      for (let age = 0; age < change.length; age++) {
        out[age] = level;
        level -= change[age];
      }
      return out;
    });
    return { end, changes, levels };
  });
}

/** Products of two channels. */
export class PairSums {
  readonly #shape: SumsShape;
  readonly #paths: readonly Path[];
  /** By later kind, earlier kind, and which of the two channels is the later. */
  readonly #full = new Map<number, Float64Array>();
  readonly #tails = new Map<number, Float64Array>();
  readonly #channels: number;
  /** (furthest + 1) β^-k. */
  readonly #fades: Float64Array;

  constructor(shape: SumsShape, paths: readonly Path[]) {
    this.#shape = shape;
    this.#paths = paths;
    this.#channels = shape.factors.names.length;
    this.#fades = Float64Array.from({ length: shape.furthest + 1 }, (_, k) => shape.growth ** -k);
  }

  /** Σ w(t) P_c(t - m) Q_d(t + k), rounds taken away. m and k may be negative. */
  product(p: Kind, c: number, m: number, q: Kind, d: number, k: number): number {
    const { round, roundWeights } = this.#shape;
    const plain = this.#raw(p, c, m, q, d, k);
    if (round === 0 || (roundWeights[c] === 0 && roundWeights[d] === 0)) return plain;
    return (
      plain -
      roundWeights[c] * this.#raw(p, c, m + round, q, d, k) -
      roundWeights[d] * this.#raw(p, c, m, q, d, k - round) +
      roundWeights[c] * roundWeights[d] * this.#raw(p, c, m + round, q, d, k - round)
    );
  }

  #raw(p: Kind, c: number, m: number, q: Kind, d: number, k: number): number {
    if (m + k < 0) return this.#raw(q, d, -k, p, c, -m);
    const { horizon, growth } = this.#shape;
    const apart = m + k;
    const full = this.#fullOf(q, d, p, c)[apart];
    const length = horizon - k;
    const tail = length > 0 ? this.#tailOf(q, d, p, c, apart)[length] : 0;
    return growth === 1
      ? full - this.#head(p, c, q, d, k) - tail
      : (full - this.#head(p, c, q, d, k) - tail) * this.#fade(k);
  }

  #fade(k: number): number {
    return k >= 0 ? this.#fades[k] : 1 / this.#fades[-k];
  }

  /** Ticks s = 1..k of the runs, or less those of s = 1+k..0 where k is negative. */
  #head(p: Kind, c: number, q: Kind, d: number, k: number): number {
    if (p === 'change' || k === 0) return 0;
    const { factors, horizon } = this.#shape;
    const { sums, longestHorizon } = factors;
    const pair = d * this.#channels + c;
    if (k > 0) {
      if (q === 'level') throw new RangeError('Levels ahead of levels are not summed.');
      return k <= horizon ? sums.headLevels[pair * longestHorizon + k - 1] : Number.NaN;
    }
    if (q === 'change') return 0;
    let weights = 0;
    for (let x = 0; x < -k; x++) weights += this.#fades[x];
    return -sums.firstLevels[pair] * weights;
  }

  /** (furthest + 1) sums over all ticks by distance. */
  #fullOf(later: Kind, i: number, earlier: Kind, j: number): Float64Array {
    const key = this.#key(later, i, earlier, j);
    const known = this.#full.get(key);
    if (known !== undefined) return known;
    const { factors, grid, furthest, growth } = this.#shape;
    const { sums } = factors;
    const pair = i * this.#channels + j;
    const out = new Float64Array(furthest + 1);
    this.#full.set(key, out);
    if (later === 'change' && earlier === 'change') {
      const from = pair * grid.lags.length;
      out.set(sums.lagged.subarray(from, from + Math.min(furthest + 1, grid.dense)));
    } else if (later === 'change') {
      const together = this.#fullOf('change', i, 'change', j);
      out[0] = sums.levelChanges[pair];
      for (let q = 1; q <= furthest; q++) out[q] = out[q - 1] - together[q - 1];
    } else if (earlier === 'change') {
      const together = this.#fullOf('change', i, 'change', j);
      out[0] = sums.levelChanges[j * this.#channels + i];
      for (let q = 1; q <= furthest; q++) {
        let last = 0;
        for (const { end, levels, changes } of this.#paths) last += end.weight * levels[i][0] * changes[j][q - 1];
        if (factors.rungOut !== null) last += factors.rungOut.levels[pair * grid.lags.length + q - 1];
        out[q] = together[q] + growth * (out[q - 1] - last);
      }
    } else {
      const moved = this.#fullOf('level', i, 'change', j);
      out[0] = sums.levels[pair];
      for (let q = 1; q <= furthest; q++) out[q] = out[q - 1] - moved[q - 1];
    }
    return out;
  }

  /** Entry n: the products at the n last ticks of the runs. */
  #tailOf(later: Kind, i: number, earlier: Kind, j: number, apart: number): Float64Array {
    const key = this.#key(later, i, earlier, j) * (this.#shape.furthest + 1) + apart;
    const known = this.#tails.get(key);
    if (known !== undefined) return known;
    const length = Math.max(0, this.#shape.furthest - apart);
    const out = new Float64Array(length + 1);
    for (const { end, levels, changes } of this.#paths) {
      const late = later === 'change' ? changes[i] : levels[i];
      const early = earlier === 'change' ? changes[j] : levels[j];
      let sum = 0;
      for (let age = 0; age < length; age++) {
        sum += end.weight * this.#fades[age] * late[age] * early[age + apart];
        out[age + 1] += sum;
      }
    }
    this.#tails.set(key, out);
    return out;
  }

  /** Σ w(t) Q_d(t + k) over the runs in which c was there, round taken away. */
  single(q: Kind, d: number, k: number, c: number): number {
    const { round, roundWeights } = this.#shape;
    const plain = this.#single(q, d, k, c);
    return roundWeights[d] === 0 || round === 0 ? plain : plain - roundWeights[d] * this.#single(q, d, k - round, c);
  }

  #single(q: Kind, d: number, k: number, c: number): number {
    const { factors, horizon } = this.#shape;
    const { sums, longestHorizon } = factors;
    const pair = d * this.#channels + c;
    let sum = q === 'change' ? sums.changeSums[pair] : sums.levelSums[pair];
    if (k > 0) sum -= q === 'change' ? sums.headSums[pair * longestHorizon + k - 1] : Number.NaN;
    if (k < 0 && q === 'level') for (let x = 0; x < -k; x++) sum += this.#fades[x] * sums.firstSums[pair];
    if (factors.rungOut !== null && q === 'change') {
      // Runs that rang out are summed up to their last tick.
      const from = (c * this.#channels + d) * this.#shape.grid.lags.length;
      for (let age = 0; age < -k; age++) sum -= this.#fades[age] * factors.rungOut.changes[from + age];
    }
    for (const { end, levels, changes } of this.#paths) {
      if (end.isThere[c] === 0) continue;
      const values = q === 'change' ? changes[d] : levels[d];
      for (let age = 0; age < horizon - k; age++) sum -= end.weight * this.#fades[age] * values[age];
    }
    return sum * this.#fade(k);
  }

  /** Σ w(t) over the runs in which c and d were there. */
  count(c: number, d: number): number {
    const { factors, horizon } = this.#shape;
    let sum = factors.sums.counts[c * this.#channels + d];
    for (const { end } of this.#paths) {
      if (end.isThere[c] === 0 || end.isThere[d] === 0) continue;
      for (let age = 0; age < horizon; age++) sum -= end.weight * this.#fades[age];
    }
    return sum;
  }

  /** (nc × nc) of `count`. */
  counts(): Float64Array {
    const nc = this.#channels;
    return Float64Array.from({ length: nc * nc }, (_, at) => this.count(Math.floor(at / nc), at % nc));
  }

  /** Σ w(t) over all runs. */
  origins(): number {
    const { factors, horizon } = this.#shape;
    let sum = factors.sums.count;
    for (const { end } of this.#paths) {
      for (let age = 0; age < horizon; age++) sum -= end.weight * this.#fades[age];
    }
    return sum;
  }

  #key(later: Kind, i: number, earlier: Kind, j: number): number {
    const kinds = (later === 'level' ? 2 : 0) + (earlier === 'level' ? 1 : 0);
    return (kinds * this.#channels + i) * this.#channels + j;
  }

  /** Forgets what is known of pairs, to make room for others. */
  clear(): void {
    this.#full.clear();
    this.#tails.clear();
  }
}
