/**
 * What a path without a plan implies of an input, where that is not what would best be expected of it. A map learned under
 * a penalty, from futures full of unforeseen moves, is shrunken and a little wrong; once the moves are told, what it is
 * wrong by can be seen. It is booked as expectation of the input: so a plan sets it right, and a path without one stays.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { multiply } from '../linalg/products.ts';
import type { ExpectationMap } from './expectation.ts';
import { errorOf, joinSums, type PlanFolds, type PlanSums } from './plan-folds.ts';
import type { PlanOrigins } from './plan-origins.ts';
import { filterInto } from './plan-surprise.ts';
import { penalised } from './ridge.ts';
import { gainsSurely, sureGain } from './sure-gain.ts';

const PENALTIES = [1e-3, 1e-2, 1e-1, 1, 10] as const;
/** Of the curves' amplitudes: lags and dead time leave some of them nearly without effect. */
const CURVE_PENALTY = 1e-3;
const LEAST_GAIN = 0.01;

/** Gains of the filters and delays, as learned behind the present expectation. */
export interface PlanAnswer {
  /** (ny × np·f) */
  readonly gain: Float64Array;
  /** (ny × np) */
  readonly delay: Int32Array;
  readonly decays: readonly number[];
}

/**
 * The expectation of one input, moved to what the paths imply; the same one where that does not surely help.
 *
 * shapes  left (n × ny·S): what path and plan together missed; NaN where missing
 * units   standardised
 * throws  TrainError 'fit' from the solves
 * source  own; ridge as Hoerl & Kennard, Technometrics 12 (1970)
 * cost    O(n q (q + ny S))
 */
export function impliedExpectation(
  origins: PlanOrigins,
  folds: PlanFolds,
  expected: ExpectationMap,
  left: Float64Array,
  answer: PlanAnswer,
  which: number,
  planned: number,
  horizon: number,
): ExpectationMap {
  const curves = movingCurves(horizon, answer.decays);
  const effect = effectOf(origins, curves, answer, which, planned, horizon);
  const K = curves.length / horizon;
  const groups = gatherSums(origins, folds, left, which, planned);
  const without = folds.each((_, judged) => groups[judged].energy);
  const errors = PENALTIES.map((penalty) =>
    folds.each((learned, judged) => {
      const moves = amplitudes(joinSums(learned.map((g) => groups[g])), effect, K, penalty);
      return errorOf(groups[judged], effectMap(moves, effect, K));
    }),
  );
  const sure = errors.map((perFold) => sureGain(perFold, without));
  const best = sure.indexOf(Math.max(...sure));
  if (!gainsSurely(errors[best], without, LEAST_GAIN)) return expected;
  const moves = amplitudes(joinSums(groups), effect, K, PENALTIES[best]);
  const moved = multiply(moves, curves, origins.seenCount, K, horizon);
  return { gram: expected.gram, map: expected.map.map((value, k) => value + moved[k]) };
}

/** (K × H) a constant, and powers of the filters' poles. */
function movingCurves(horizon: number, decays: readonly number[]): Float64Array {
  const out = new Float64Array((decays.length + 1) * horizon).fill(1, 0, horizon);
  decays.forEach((a, k) => {
    for (let h = 0; h < horizon; h++) out[(k + 1) * horizon + h] = a ** h;
  });
  return out;
}

/** (K × ny·S) what each curve, expected more, takes off the paths at the judged steps. */
function effectOf(
  { steps }: PlanOrigins,
  curves: Float64Array,
  { gain, delay, decays }: PlanAnswer,
  which: number,
  planned: number,
  horizon: number,
): Float64Array {
  const f = decays.length + 2;
  const ny = delay.length / planned;
  const K = curves.length / horizon;
  const width = ny * steps.length;
  const out = new Float64Array(K * width);
  const filtered = new Float64Array(f * horizon);
  for (let k = 0; k < K; k++) {
    filterInto(curves, k * horizon, horizon, decays, filtered);
    for (let i = 0; i < ny; i++) {
      steps.forEach((h, s) => {
        const at = h - 1 - delay[i * planned + which];
        if (at < 0) return;
        for (let b = 0; b < f; b++) {
          out[k * width + i * steps.length + s] -= gain[(i * planned + which) * f + b] * filtered[b * horizon + at];
        }
      });
    }
  }
  return out;
}

/** Sums of every group, and of what belongs to none; a missing reading counts as nothing missed. */
function gatherSums(
  origins: PlanOrigins,
  folds: PlanFolds,
  left: Float64Array,
  which: number,
  planned: number,
): PlanSums[] {
  const { seen, seenCount: q, count } = origins;
  const width = left.length / Math.max(1, count);
  const sums: PlanSums[] = Array.from({ length: folds.groups + 1 }, () => ({
    gram: new Float64Array(q * q),
    right: new Float64Array(q * width),
    energy: 0,
  }));
  for (let n = 0; n < count; n++) {
    const into = sums[folds.groupOf[n] < 0 ? folds.groups : folds.groupOf[n]];
    const row = (n * planned + which) * q;
    for (let a = 0; a < q; a++) {
      const x = seen[row + a];
      if (x === 0) continue;
      for (let b = 0; b < q; b++) into.gram[a * q + b] += x * seen[row + b];
      for (let k = 0; k < width; k++) into.right[a * width + k] += x * (left[n * width + k] || 0);
    }
    for (let k = 0; k < width; k++) into.energy += (left[n * width + k] || 0) ** 2;
  }
  return sums;
}

/** (q × K) amplitudes of the curves whose effect comes nearest to what was left, step by step, of what is seen. */
function amplitudes({ gram, right }: PlanSums, effect: Float64Array, K: number, penalty: number): Float64Array {
  const q = Math.round(Math.sqrt(gram.length));
  const width = right.length / q;
  const map = right.slice();
  solveCholesky(cholesky(penalised(gram, q, penalty), q), q, map, width);
  const inner = new Float64Array(K * K);
  const outer = new Float64Array(K * q);
  for (let k = 0; k < K; k++) {
    for (let l = 0; l < K; l++) {
      for (let j = 0; j < width; j++) inner[k * K + l] += effect[k * width + j] * effect[l * width + j];
    }
    for (let a = 0; a < q; a++) {
      for (let j = 0; j < width; j++) outer[k * q + a] += effect[k * width + j] * map[a * width + j];
    }
  }
  solveCholesky(cholesky(penalised(inner, K, CURVE_PENALTY), K), K, outer, q);
  const out = new Float64Array(q * K);
  for (let a = 0; a < q; a++) for (let k = 0; k < K; k++) out[a * K + k] = outer[k * q + a];
  return out;
}

/** (q × ny·S) */
function effectMap(moves: Float64Array, effect: Float64Array, K: number): Float64Array {
  return multiply(moves, effect, moves.length / K, K, effect.length / K);
}
