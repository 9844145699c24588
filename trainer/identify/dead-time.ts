/**
 * Dead time of every signal behind every planned input: the delay of the input's surprise at which the filters explain most
 * of what the path missed. Tried on a coarse ladder, then tick by tick around its best rung.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import type { PlanOrigins } from './plan-origins.ts';
import { filterInto } from './plan-surprise.ts';
import { penalised } from './ridge.ts';

const LADDER = [0, 1, 2, 3, 4, 6, 8, 12, 16, 24, 32, 48, 64, 96, 128, 192, 256, 384, 512] as const;
/** Delays tried between the rungs around the best. */
const FINER = 8;
const PENALTY = 1e-3;
/** A shorter delay that explains as much but for this share is preferred. */
const TIE = 5e-4;

/**
 * Finds the delays.
 *
 * shapes  surprises (n × np·H); result (ny × np), below half the horizon
 * units   ticks
 * throws  TrainError 'fit' from the solves
 * source  step by step search as for dead time in step-response identification (common practice)
 * cost    O(n np delays steps (f² + f ny)) for f filters
 */
export function findDelays(
  origins: PlanOrigins,
  surprises: Float64Array,
  ny: number,
  np: number,
  horizon: number,
  decays: readonly number[],
): Int32Array {
  const out = new Int32Array(ny * np);
  const coarse = LADDER.filter((delay) => delay === 0 || delay <= horizon / 2);
  for (let p = 0; p < np; p++) {
    const first = unexplained(origins, surprises, p, ny, np, horizon, decays, coarse);
    const best = Array.from({ length: ny }, (_, i) => shortest(first, i, ny));
    const near = [...new Set(best.flatMap((k) => around(coarse, k)))].sort((a, b) => a - b);
    const finer = unexplained(origins, surprises, p, ny, np, horizon, decays, near);
    for (let i = 0; i < ny; i++) out[i * np + p] = near[shortest(finer, i, ny)] ?? 0;
  }
  return out;
}

/** The rung, and up to FINER delays evenly between its neighbours. */
function around(ladder: readonly number[], k: number): number[] {
  const low = ladder[Math.max(0, k - 1)];
  const high = ladder[Math.min(ladder.length - 1, k + 1)];
  const stride = Math.max(1, Math.ceil((high - low) / FINER));
  const out = [ladder[k]];
  for (let delay = low; delay <= high; delay += stride) out.push(delay);
  return out;
}

function shortest(errors: Float64Array, signal: number, ny: number): number {
  const own = Array.from({ length: errors.length / ny }, (_, k) => errors[k * ny + signal]);
  const least = Math.min(...own);
  return own.findIndex((error) => error <= least * (1 + TIE));
}

/** (delays × ny) squares left when one input's filters alone explain them; a missing reading counts as no miss. */
function unexplained(
  origins: PlanOrigins,
  surprises: Float64Array,
  which: number,
  ny: number,
  np: number,
  horizon: number,
  decays: readonly number[],
  delays: readonly number[],
): Float64Array {
  const { steps, missed } = origins;
  const f = decays.length + 2;
  const filtered = new Float64Array(f * horizon);
  const grams = delays.map(() => new Float64Array(f * f));
  const rights = delays.map(() => new Float64Array(f * ny));
  const energy = new Float64Array(ny);
  for (let n = 0; n < origins.count; n++) {
    filterInto(surprises, (n * np + which) * horizon, horizon, decays, filtered);
    steps.forEach((h, s) => {
      for (let i = 0; i < ny; i++) energy[i] += squareOf(missed[(n * ny + i) * steps.length + s]);
      delays.forEach((delay, k) => {
        const at = h - 1 - delay;
        if (at < 0) return;
        for (let a = 0; a < f; a++) {
          const x = filtered[a * horizon + at];
          for (let b = 0; b < f; b++) grams[k][a * f + b] += x * filtered[b * horizon + at];
          for (let i = 0; i < ny; i++) {
            const miss = missed[(n * ny + i) * steps.length + s];
            if (!Number.isNaN(miss)) rights[k][a * ny + i] += x * miss;
          }
        }
      });
    });
  }
  const out = new Float64Array(delays.length * ny);
  delays.forEach((_, k) => {
    const gains = rights[k].slice();
    solveCholesky(cholesky(penalised(grams[k], f, PENALTY), f), f, gains, ny);
    for (let i = 0; i < ny; i++) {
      let left = energy[i];
      for (let a = 0; a < f; a++) {
        let pushed = 0;
        for (let b = 0; b < f; b++) pushed += grams[k][a * f + b] * gains[b * ny + i];
        left += gains[a * ny + i] * (pushed - 2 * rights[k][a * ny + i]);
      }
      out[k * ny + i] = Math.max(0, left);
    }
  });
  return out;
}

function squareOf(value: number): number {
  return Number.isNaN(value) ? 0 : value * value;
}
