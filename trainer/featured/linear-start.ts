/**
 * A linear state space fitted on its free run: where the search for a nonlinear one starts, and what that must beat. Hidden
 * states start as slow averages of the inputs, at several speeds of which the best is kept, since a free run's error has
 * local minima; they come back with mean 0 and standard deviation 1, so that one width of features suits all arguments.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import { type DrivenRecord, freeRunProblem, type MemberShape, parameterLayout, stateRun } from './free-run.ts';
import { type Minimum, minimise } from './levenberg-marquardt.ts';

/** A fitted member without features. */
export interface LinearStart {
  readonly shape: MemberShape;
  readonly parameters: Float64Array;
  readonly cost: number;
}

/** What a member without features has. */
export const NO_FEATURES = { frequencies: new Float64Array(0), phases: new Float64Array(0) };
/** Speeds a hidden average starts at, per tick; several of them where there are several hidden states. */
const DECAYS = [0.5, 0.8, 0.94, 0.985] as const;
const ITERATIONS = 40;
/** After so many the best of several starts alone goes on. */
const FIRST_ITERATIONS = 20;
/** Share of the trace that keeps the regression solvable where inputs are copies. */
const REGRESSION_RIDGE = 1e-8;

/**
 * Fits.
 *
 * shapes  record with ny signals and nu inputs
 * units   standardised
 * throws  nothing; null where no start gives a run that stays inside the limits
 * source  output error: Ljung (1999), section 7.4; started from a least-squares ARX fit
 * cost    a few Levenberg-Marquardt runs
 */
export function fitLinearStart(record: DrivenRecord, hiddenCount: number): LinearStart | null {
  const shape = {
    signalCount: record.signals.length,
    inputCount: record.inputs.length,
    hiddenCount,
    featureCount: 0,
  };
  const problem = freeRunProblem(shape, NO_FEATURES, record, 0);
  let first: Minimum | null = null;
  for (const decays of combinations(hiddenCount)) {
    const tried = minimise(problem, startFrom(record, shape, decays), FIRST_ITERATIONS);
    if (Number.isFinite(tried.cost) && (first === null || tried.cost < first.cost)) first = tried;
  }
  if (first === null) return null;
  const { parameters, cost } = minimise(problem, first.parameters, ITERATIONS - FIRST_ITERATIONS);
  return { shape, cost, parameters: normalised({ shape, cost, parameters }, record) };
}

/** Rising choices of `count` of the decays. */
function combinations(count: number): number[][] {
  let all: number[][] = [[]];
  for (let k = 0; k < count; k++) {
    all = all.flatMap((chosen) =>
      DECAYS.filter((decay) => chosen.length === 0 || decay > chosen[chosen.length - 1]).map((d) => [...chosen, d]),
    );
  }
  return all;
}

/** Parameters with hidden averages of the inputs' sum at given speeds, the signals regressed on them and on the inputs. */
function startFrom(record: DrivenRecord, shape: MemberShape, decays: readonly number[]): Float64Array {
  const { states, width, startAt, count } = parameterLayout(shape);
  const ny = shape.signalCount;
  const parameters = new Float64Array(count);
  const pushes = inputWeights(record);
  const drive = new Float64Array(record.to);
  record.inputs.forEach((u, k) => {
    for (let t = 0; t < record.to; t++) drive[t] += pushes[k] * u[t];
  });
  const hidden = decays.map((decay, k) => {
    const row = (ny + k) * width;
    parameters[row + ny + k] = decay;
    pushes.forEach((push, i) => {
      parameters[row + states + i] = (1 - decay) * push;
    });
    const h = new Float64Array(record.to + 1);
    h[record.from] = drive[record.from];
    for (let t = record.from; t < record.to; t++) h[t + 1] = decay * h[t] + (1 - decay) * drive[t];
    parameters[startAt + ny + k] = h[record.from];
    return h;
  });
  const regressors = [...record.signals, ...hidden, ...record.inputs];
  record.signals.forEach((y, i) => {
    parameters.set(regression(regressors, y, record), i * width);
    const first = y.subarray(record.from, record.to).find((value) => !Number.isNaN(value));
    parameters[startAt + i] = first ?? 0;
  });
  return parameters;
}

/** (nu) weights of the inputs in what drives the hidden averages: their share of the signals' movements. */
function inputWeights({ signals, inputs, from, to }: DrivenRecord): number[] {
  const weights = inputs.map((u) => {
    let sum = 0;
    for (const y of signals) {
      for (let t = from; t < to; t++) if (!Number.isNaN(y[t])) sum += y[t] * u[t];
    }
    return sum / (to - from);
  });
  const size = Math.hypot(...weights);
  return size > 0 ? weights.map((weight) => weight / size) : weights.map(() => 1);
}

/** Least squares of y(t+1) on the regressors and a one, at ticks with every reading. */
function regression(regressors: readonly Float64Array[], y: Float64Array, { from, to }: DrivenRecord): Float64Array {
  const p = regressors.length + 1;
  const gram = new Float64Array(p * p);
  const right = new Float64Array(p);
  const row = new Float64Array(p).fill(1);
  for (let t = from; t + 1 < to; t++) {
    for (let k = 0; k < p - 1; k++) row[k] = regressors[k][t];
    const target = y[t + 1];
    if (Number.isNaN(target) || row.some(Number.isNaN)) continue;
    for (let a = 0; a < p; a++) {
      right[a] += row[a] * target;
      for (let b = 0; b < p; b++) gram[a * p + b] += row[a] * row[b];
    }
  }
  let trace = 0;
  for (let k = 0; k < p; k++) trace += gram[k * p + k];
  for (let k = 0; k < p; k++) gram[k * p + k] += REGRESSION_RIDGE * trace || 1;
  solveCholesky(cholesky(gram, p), p, right, 1);
  return right;
}

/** The same member with hidden states shifted and scaled to mean 0 and standard deviation 1 over the record. */
function normalised({ shape, parameters }: LinearStart, record: DrivenRecord): Float64Array {
  const { states, width, startAt } = parameterLayout(shape);
  const runs = stateRun(shape, NO_FEATURES, parameters, record);
  const out = parameters.slice();
  for (let k = shape.signalCount; k < states; k++) {
    const { mean, sd } = spread(runs[k]);
    if (!(sd > 0)) continue;
    // x_k = mean + sd · new: columns take the scale and hand the mean to the offset; row k is shifted and divided.
    for (let i = 0; i < states; i++) {
      out[i * width + width - 1] += out[i * width + k] * mean;
      out[i * width + k] *= sd;
    }
    out[k * width + width - 1] -= mean;
    for (let j = 0; j < width; j++) out[k * width + j] /= sd;
    out[startAt + k] = (out[startAt + k] - mean) / sd;
  }
  return out;
}

function spread(values: Float64Array): { mean: number; sd: number } {
  const mean = values.reduce((sum, value) => sum + value, 0) / values.length;
  const square = values.reduce((sum, value) => sum + (value - mean) * (value - mean), 0) / values.length;
  return { mean, sd: Math.sqrt(square) };
}
