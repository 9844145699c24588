/**
 * Gains of the filters, signal by signal: ridge on what the path without a plan missed, under the penalty that gains most
 * surely on rolling origins, and no gain at all where none surely does.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { errorOf, joinSums, type PlanFolds, type PlanSums } from './plan-folds.ts';
import type { PlanOrigins } from './plan-origins.ts';
import { filterInto } from './plan-surprise.ts';
import { penalised } from './ridge.ts';
import { gainsSurely, geometricMean, sureGain } from './sure-gain.ts';

/** Up to heavy ones: where the answer changes with the season, a small part of it is all that is sure. */
const PENALTIES = [1e-5, 1e-4, 1e-3, 1e-2, 1e-1, 1, 3, 10, 30, 100] as const;
/** A heavier penalty that gains as surely but for this, in logarithms, is preferred. */
const TIE = 0.002;
/** A signal listens to plans only for this gain. */
const LEAST_GAIN = 0.01;

/** (ny × np·f) gains, and (ny) squared error with them over without, on the folds. */
export interface PlanGains {
  readonly gain: Float64Array;
  readonly ratio: readonly number[];
}

/**
 * Learns.
 *
 * shapes  surprises (n × np·H), delay (ny × np)
 * units   standardised
 * throws  TrainError 'fit' from the solves
 * source  Hoerl & Kennard, Technometrics 12 (1970)
 * cost    O(ny n steps (np f)²) for f filters
 */
export function learnGains(
  origins: PlanOrigins,
  folds: PlanFolds,
  surprises: Float64Array,
  ny: number,
  np: number,
  horizon: number,
  decays: readonly number[],
  delay: Int32Array,
): PlanGains {
  const f = decays.length + 2;
  const width = np * f;
  const gain = new Float64Array(ny * width);
  const ratio: number[] = [];
  for (let i = 0; i < ny; i++) {
    const groups = gatherSums(origins, folds, surprises, i, ny, np, horizon, decays, delay);
    const chosen = choosePenalty(folds, groups, width);
    ratio.push(chosen.ratio);
    // The last group holds the origins between groups, which serve here alone.
    if (chosen.penalty !== null) gain.set(solve(joinSums(groups), width, chosen.penalty), i * width);
  }
  return { gain, ratio };
}

function choosePenalty(
  folds: PlanFolds,
  groups: readonly PlanSums[],
  width: number,
): { readonly penalty: number | null; readonly ratio: number } {
  const without = folds.each((_, judged) => groups[judged].energy);
  const errors = PENALTIES.map((penalty) =>
    folds.each((learned, judged) => {
      const gains = solve(joinSums(learned.map((g) => groups[g])), width, penalty);
      return errorOf(groups[judged], gains);
    }),
  );
  const sure = errors.map((perFold) => sureGain(perFold, without));
  const best = sure.findLastIndex((gain) => gain >= Math.max(...sure) - TIE);
  if (!gainsSurely(errors[best], without, LEAST_GAIN)) return { penalty: null, ratio: 1 };
  return { penalty: PENALTIES[best], ratio: geometricMean(errors[best]) / geometricMean(without) };
}

/** Sums of every group, and of what belongs to none. */
function gatherSums(
  origins: PlanOrigins,
  folds: PlanFolds,
  surprises: Float64Array,
  signal: number,
  ny: number,
  np: number,
  horizon: number,
  decays: readonly number[],
  delay: Int32Array,
): PlanSums[] {
  const { steps, missed } = origins;
  const f = decays.length + 2;
  const width = np * f;
  const sums: PlanSums[] = Array.from({ length: folds.groups + 1 }, () => ({
    gram: new Float64Array(width * width),
    right: new Float64Array(width),
    energy: 0,
  }));
  const filtered = Array.from({ length: np }, () => new Float64Array(f * horizon));
  const row = new Float64Array(width);
  for (let n = 0; n < origins.count; n++) {
    const group = folds.groupOf[n];
    const into = sums[group < 0 ? folds.groups : group];
    for (let p = 0; p < np; p++) filterInto(surprises, (n * np + p) * horizon, horizon, decays, filtered[p]);
    for (let s = 0; s < steps.length; s++) {
      const miss = missed[(n * ny + signal) * steps.length + s];
      if (Number.isNaN(miss)) continue;
      for (let p = 0; p < np; p++) {
        const at = steps[s] - 1 - delay[signal * np + p];
        for (let b = 0; b < f; b++) row[p * f + b] = at < 0 ? 0 : filtered[p][b * horizon + at];
      }
      into.energy += miss * miss;
      for (let a = 0; a < width; a++) {
        into.right[a] += row[a] * miss;
        for (let b = 0; b < width; b++) into.gram[a * width + b] += row[a] * row[b];
      }
    }
  }
  return sums;
}

function solve({ gram, right }: PlanSums, width: number, penalty: number): Float64Array {
  const gains = right.slice();
  solveCholesky(cholesky(penalised(gram, width, penalty), width), width, gains, 1);
  return gains;
}
