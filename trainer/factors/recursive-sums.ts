/** The recursive features' sums: against changes at every step ahead, at the runs' ends, and by themselves. */
import type { PairSums, Path, SumsShape } from './pair-sums.ts';
import { memories, type PoleShape, remember, turn } from './pole-sums.ts';

/** q = nc · perChannel recursive features, the level not among them. */
export interface RecursiveSums {
  /** (H × nc or fewer × q) Σ w(t) φ(t) D_i(t + k); entry ((k - 1) · signals + i) · q + f. */
  readonly ahead: Float64Array;
  /** (nc × q) Σ w(t) φ(t - 1) D_i(t). */
  readonly before: Float64Array;
  /** (nc × nc) Σ w(t) D_i(t) D_j(t). */
  readonly together: Float64Array;
  /** (q × q) Σ over runs of w(T) φ(T) φ(T)'. */
  readonly ends: Float64Array;
  /** Per run: w(T) φ(T), (q). */
  readonly atEnds: readonly Float64Array[];
  /** Of the runs that rang out: Σ w φ u_c and Σ w φ at their last ticks, (nc × q); null: there are none. */
  readonly rungOut: { readonly levels: Float64Array; readonly there: Float64Array } | null;
}

/**
 * Works them out.
 *
 * shapes  as RecursiveSums
 * units   raw
 * throws  nothing
 * source  head of pole-sums.ts; with a round, D' = D - w D(t - W) goes on for W ticks after a run's last, so that the furthest
 *         step is H + W
 * cost    O(nc² places F + nc q (H + W))
 */
export function crossSums(
  shape: SumsShape,
  poleShape: PoleShape,
  pairs: PairSums,
  paths: readonly Path[],
): RecursiveSums {
  const { factors, horizon, round, roundWeights, growth } = shape;
  const { channels, perChannel } = poleShape;
  const { signalCount } = factors;
  const q = channels * perChannel;
  const atEnds = endsOf(shape, poleShape);
  const furthest = horizon + round;
  let cross = furthestSums(shape, poleShape);
  const ahead = new Float64Array(horizon * signalCount * q);
  const lastChange = (path: Path, i: number, k: number): number =>
    changeAt(path, i, horizon - k, round, roundWeights[i]);
  for (let k = furthest; k >= 1; k--) {
    if (k < furthest) cross = nearer(k);
    if (k <= horizon) ahead.set(cross.subarray(0, signalCount * q), (k - 1) * signalCount * q);
  }
  const before = shifted(0);
  for (let at = 0; at < before.length; at++) before[at] *= growth;
  const together = new Float64Array(channels * channels);
  for (let i = 0; i < channels; i++) {
    for (let j = 0; j < channels; j++) together[i * channels + j] = pairs.product('change', i, 0, 'change', j, 0);
  }
  return {
    ahead,
    before,
    together,
    ends: outer(atEnds, paths, q, growth ** -horizon),
    atEnds,
    rungOut: rungOutOf(shape, poleShape),
  };

  /** cross(k+1) less what stands at the runs' ends. */
  function shifted(k: number): Float64Array {
    const out = cross.slice();
    paths.forEach((path, r) => {
      for (let i = 0; i < channels; i++) {
        const change = lastChange(path, i, k + 1);
        if (change === 0) continue;
        const weighted = atEnds[r];
        for (let f = 0; f < q; f++) out[i * q + f] -= weighted[f] * change;
      }
    });
    return out;
  }

  function nearer(k: number): Float64Array {
    const from = shifted(k);
    const out = new Float64Array(from.length);
    for (let i = 0; i < channels; i++) {
      for (let c = 0; c < channels; c++) {
        const at = i * q + c * perChannel;
        turn(poleShape, from, at, growth, pairs.product('change', c, 0, 'change', i, k), out, at);
      }
    }
    return out;
  }
}

/** Change of a channel so many ticks before a run's last, its round taken away; the last of all is 0, later ones negative. */
export function changeAt(path: Path, i: number, age: number, round: number, weight: number): number {
  const own = age >= 0 ? path.changes[i][age] : 0;
  return round === 0 || weight === 0 ? own : own - weight * path.changes[i][age + round];
}

/** (nc × q) Σ w(t) φ(t) D_i(t + H + W). */
function furthestSums(shape: SumsShape, poleShape: PoleShape): Float64Array {
  const { factors, grid, horizon, round, roundWeights, growth } = shape;
  const { channels, perChannel } = poleShape;
  const q = channels * perChannel;
  const out = new Float64Array(channels * q);
  const fade = growth ** -(horizon + round);
  const later = growth ** round;
  const add = (shift: number, share: (i: number, c: number) => number): void => {
    const sums = remember(factors.sums.lagged, memories(poleShape, grid, shift), grid.lags.length);
    for (let i = 0; i < channels; i++) {
      for (let c = 0; c < channels; c++) {
        const factor = fade * share(i, c);
        if (factor === 0) continue;
        const from = (i * channels + c) * perChannel;
        const to = i * q + c * perChannel;
        for (let f = 0; f < perChannel; f++) out[to + f] += factor * sums[from + f];
      }
    }
  };
  add(horizon + round, (i, c) => 1 + roundWeights[i] * roundWeights[c] * later);
  if (round > 0) {
    add(horizon, (i) => -roundWeights[i] * later);
    add(horizon + 2 * round, (_, c) => -roundWeights[c]);
  }
  return out;
}

function rungOutOf({ factors, grid }: SumsShape, poleShape: PoleShape): RecursiveSums['rungOut'] {
  const { rungOut } = factors;
  if (rungOut === null) return null;
  const memory = memories(poleShape, grid, 0);
  return {
    levels: remember(rungOut.levels, memory, grid.lags.length),
    there: remember(rungOut.changes, memory, grid.lags.length),
  };
}

/** Per run w(T) φ(T), T a horizon before its last tick. */
function endsOf(
  { factors, grid, horizon, round, roundWeights, growth }: SumsShape,
  poleShape: PoleShape,
): Float64Array[] {
  const { channels, perChannel } = poleShape;
  const memory = memories(poleShape, grid, horizon);
  const older = round > 0 ? memories(poleShape, grid, horizon + round) : null;
  return factors.ends.map((end) => {
    const phi = remember(end.changes, memory, grid.lags.length);
    const ago = older && remember(end.changes, older, grid.lags.length);
    const weight = end.weight * growth ** -horizon;
    return phi.map((value, at) => {
      const c = Math.floor(at / perChannel);
      return c < channels ? weight * (value - (ago === null ? 0 : roundWeights[c] * ago[at])) : 0;
    });
  });
}

/** Σ w φ φ' from w φ. */
function outer(atEnds: readonly Float64Array[], paths: readonly Path[], q: number, fade: number): Float64Array {
  const out = new Float64Array(q * q);
  atEnds.forEach((phi, r) => {
    const weight = paths[r].end.weight * fade;
    if (weight === 0) return;
    for (let f = 0; f < q; f++) {
      const value = phi[f] / weight;
      for (let g = 0; g <= f; g++) out[f * q + g] += value * phi[g];
    }
  });
  for (let f = 0; f < q; f++) for (let g = 0; g < f; g++) out[g * q + f] = out[f * q + g];
  return out;
}
