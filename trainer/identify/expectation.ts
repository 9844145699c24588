/**
 * What a model's own state and paths say of an input to come: ridge from what is seen at an origin to the input's change
 * at every step, and the few curves that carry most of it. A plan is then held against this, not against the last value:
 * what the past already told, the path without a plan already holds.
 */
import { cholesky, solveCholesky, solveLowerTransposed } from '../linalg/cholesky.ts';
import { symmetricEigen } from '../linalg/eigen.ts';
import { multiply } from '../linalg/products.ts';
import type { PlanFolds } from './plan-folds.ts';
import type { PlanOrigins } from './plan-origins.ts';
import { penalised } from './ridge.ts';
import { geometricMean } from './sure-gain.ts';

/** Expected input(t + h) = input(t) + Σ_k basis[k, h-1] (readout seen)_k, standardised. */
export interface Expectation {
  readonly curves: number;
  /** (curves × q) */
  readonly readout: Float64Array;
  /** (curves × H) */
  readonly basis: Float64Array;
}

/** Relative to the variance of what is seen; light, since this is a projection more than a forecast. */
const PENALTIES = [1e-4, 1e-3, 1e-2, 1e-1, 1] as const;
/** Share of what a map carries that its curves must keep. */
const CURVE_SHARE = 0.995;
const RAISED = 1e-9;

/** What is expected before it is made small. */
export interface ExpectationMap {
  /** (q × q) sums of products of what is seen */
  readonly gram: Float64Array;
  /** (q × H) input's change at every step, of what is seen */
  readonly map: Float64Array;
}

/**
 * Learns the expectation of one planned input.
 *
 * shapes  which 0 … np − 1 of np
 * units   standardised
 * throws  TrainError 'fit' from the solves
 * source  ridge: Hoerl & Kennard, Technometrics 12 (1970)
 * cost    O(n q (q + H) + q³)
 */
export function learnExpectation(
  origins: PlanOrigins,
  folds: PlanFolds,
  which: number,
  planned: number,
  horizon: number,
): ExpectationMap {
  const penalty = choosePenalty(origins, folds, which, planned, horizon);
  const all = Array.from({ length: horizon }, (_, k) => k + 1);
  const { gram, right } = momentsOf(origins, which, planned, horizon, all, () => true);
  const q = origins.seenCount;
  const map = right.slice();
  solveCholesky(cholesky(penalised(gram, q, penalty), q), q, map, horizon);
  return { gram, map };
}

/**
 * The best few curves of a map: directions of L'M, with L L' the moments of what is seen.
 *
 * shapes  result up to `most` curves, at least one
 * units   standardised
 * throws  TrainError 'fit' from the factorisations
 * source  reduced-rank regression: Izenman, J. Multivariate Analysis 5 (1975), equation 2.8 with the identity as weight
 * cost    O(q² (q + H))
 */
export function fewCurves({ gram, map }: ExpectationMap, horizon: number, most: number): Expectation {
  return curvesOf(gram, map, Math.round(Math.sqrt(gram.length)), horizon, most);
}

/** Moments of what is seen, and its products with the input's changes at some steps; over origins that pass. */
function momentsOf(
  origins: PlanOrigins,
  which: number,
  planned: number,
  horizon: number,
  steps: readonly number[],
  passes: (n: number) => boolean,
): { gram: Float64Array; right: Float64Array; energy: number } {
  const { seen, seenCount: q, now, future } = origins;
  const gram = new Float64Array(q * q);
  const right = new Float64Array(q * steps.length);
  const change = new Float64Array(steps.length);
  let energy = 0;
  for (let n = 0; n < origins.count; n++) {
    if (!passes(n)) continue;
    const from = (n * planned + which) * horizon;
    for (let s = 0; s < steps.length; s++) {
      change[s] = future[from + steps[s] - 1] - now[n * planned + which];
      energy += change[s] * change[s];
    }
    const row = (n * planned + which) * q;
    for (let a = 0; a < q; a++) {
      const x = seen[row + a];
      if (x === 0) continue;
      for (let b = 0; b <= a; b++) gram[a * q + b] += x * seen[row + b];
      for (let s = 0; s < steps.length; s++) right[a * steps.length + s] += x * change[s];
    }
  }
  for (let a = 0; a < q; a++) for (let b = 0; b < a; b++) gram[b * q + a] = gram[a * q + b];
  return { gram, right, energy };
}

function choosePenalty(
  origins: PlanOrigins,
  folds: PlanFolds,
  which: number,
  planned: number,
  horizon: number,
): number {
  const { steps, seenCount: q } = origins;
  const groups = Array.from({ length: folds.groups }, (_, g) =>
    momentsOf(origins, which, planned, horizon, steps, (n) => folds.groupOf[n] === g),
  );
  const errors = PENALTIES.map((penalty) =>
    folds.each((learned, judged) => {
      const gram = sum(learned.map((g) => groups[g].gram));
      const map = sum(learned.map((g) => groups[g].right));
      solveCholesky(cholesky(penalised(gram, q, penalty), q), q, map, steps.length);
      const { gram: S, right, energy } = groups[judged];
      const pushed = multiply(S, map, q, q, steps.length);
      let error = energy;
      for (let k = 0; k < map.length; k++) error += map[k] * (pushed[k] - 2 * right[k]);
      return Math.max(0, error);
    }),
  );
  const means = errors.map(geometricMean);
  return PENALTIES[means.indexOf(Math.min(...means))];
}

function sum(parts: readonly Float64Array[]): Float64Array {
  const out = new Float64Array(parts[0].length);
  for (const part of parts) for (let k = 0; k < out.length; k++) out[k] += part[k];
  return out;
}

function curvesOf(gram: Float64Array, map: Float64Array, q: number, horizon: number, most: number): Expectation {
  const factor = cholesky(penalised(gram, q, RAISED), q);
  const carried = new Float64Array(q * horizon);
  for (let a = 0; a < q; a++) {
    for (let b = a; b < q; b++) {
      const weight = factor[b * q + a];
      for (let h = 0; h < horizon; h++) carried[a * horizon + h] += weight * map[b * horizon + h];
    }
  }
  const outer = new Float64Array(q * q);
  for (let a = 0; a < q; a++) {
    for (let b = 0; b <= a; b++) {
      let dot = 0;
      for (let h = 0; h < horizon; h++) dot += carried[a * horizon + h] * carried[b * horizon + h];
      outer[a * q + b] = dot;
      outer[b * q + a] = dot;
    }
  }
  const { values, vectors } = symmetricEigen(outer, q);
  const curves = curveCount(values, Math.min(most, q, horizon));
  const directions = new Float64Array(q * curves);
  for (let a = 0; a < q; a++) for (let k = 0; k < curves; k++) directions[a * curves + k] = vectors[a * q + k];
  const basis = new Float64Array(curves * horizon);
  for (let k = 0; k < curves; k++) {
    for (let a = 0; a < q; a++) {
      const weight = directions[a * curves + k];
      for (let h = 0; h < horizon; h++) basis[k * horizon + h] += weight * carried[a * horizon + h];
    }
  }
  solveLowerTransposed(factor, q, directions, curves);
  const readout = new Float64Array(curves * q);
  for (let a = 0; a < q; a++) for (let k = 0; k < curves; k++) readout[k * q + a] = directions[a * curves + k];
  return { curves, readout, basis };
}

function curveCount(values: Float64Array, most: number): number {
  const total = values.reduce((all, value) => all + Math.max(0, value), 0);
  let kept = 0;
  for (let k = 0; k < most; k++) {
    kept += Math.max(0, values[k]);
    if (kept >= CURVE_SHARE * total) return k + 1;
  }
  return Math.max(1, most);
}
