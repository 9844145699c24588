/**
 * Nonlinear least squares by Levenberg's and Marquardt's damped Gauss-Newton steps. The problem hands over its normal
 * matrix, so that a long run's Jacobian is never held. Not for constraints: a problem answers an infinite cost where its
 * parameters make no sense, and the step is shortened.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';

/** The problem at one point: cost ½ Σ r², and where asked for J'J and J'r. */
export interface Linearised {
  readonly cost: number;
  /** (P × P), its lower triangle */
  readonly normal: Float64Array;
  /** (P) */
  readonly gradient: Float64Array;
}

/** What is minimised. */
export interface LeastSquares {
  /** ½ Σ r² alone; infinity where the parameters cannot be used. */
  cost(parameters: Float64Array): number;
  linearise(parameters: Float64Array): Linearised;
}

/** Where the steps led. */
export interface Minimum {
  readonly parameters: Float64Array;
  readonly cost: number;
  readonly iterations: number;
}

const FIRST_DAMPING = 1e-3;
const LEAST_DAMPING = 1e-12;
const MOST_DAMPING = 1e10;
/** A parameter that nothing depends on still gets a damped, positive diagonal. */
const LEAST_DIAGONAL = 1e-12;

/**
 * Minimises from a start.
 *
 * shapes  start (P)
 * units   the problem's
 * throws  nothing; a start of infinite cost comes back as it is
 * source  Marquardt, Journal of the Society for Industrial and Applied Mathematics 11 (1963); damping divided by 5 after a
 *         step that helped and multiplied by 4 after one that did not
 * cost    one linearisation and one Cholesky factor an iteration, a cost a trial
 */
export function minimise(
  problem: LeastSquares,
  start: Float64Array,
  mostIterations: number,
  tolerance = 1e-6,
): Minimum {
  let parameters: Float64Array = start.slice();
  let damping = FIRST_DAMPING;
  let at = problem.linearise(parameters);
  let iterations = 0;
  for (; iterations < mostIterations && Number.isFinite(at.cost); iterations++) {
    let next: Float64Array | null = null;
    let cost = at.cost;
    for (; damping <= MOST_DAMPING; damping *= 4) {
      const trial = stepFrom(parameters, at, damping);
      cost = trial === null ? Number.POSITIVE_INFINITY : problem.cost(trial);
      if (!(cost < at.cost)) continue;
      next = trial;
      break;
    }
    if (next === null) break;
    const gain = (at.cost - cost) / at.cost;
    damping = Math.max(LEAST_DAMPING, damping / 5);
    parameters = next;
    if (gain < tolerance) {
      iterations++;
      return { parameters, cost, iterations };
    }
    at = problem.linearise(parameters);
  }
  return { parameters, cost: at.cost, iterations };
}

/** Parameters − (N + damping · diag N)⁻¹ g; null where that cannot be solved. */
function stepFrom(parameters: Float64Array, at: Linearised, damping: number): Float64Array | null {
  const P = parameters.length;
  const damped = at.normal.slice();
  for (let k = 0; k < P; k++) {
    const own = damped[k * P + k];
    damped[k * P + k] = own + damping * Math.max(own, LEAST_DIAGONAL);
  }
  const step = at.gradient.slice();
  try {
    solveCholesky(cholesky(damped, P), P, step, 1);
  } catch {
    return null;
  }
  const next = parameters.slice();
  for (let k = 0; k < P; k++) next[k] -= step[k];
  return next.every(Number.isFinite) ? next : null;
}
