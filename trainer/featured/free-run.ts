/**
 * The free run of a small state space with random features, and its least-squares problem:
 *
 *   x(t+1) = L [x; u; 1](t) + W φ(x, u)(t),   φ_j = √(2/D) cos(ω_j'[x; u] + b_j)
 *
 * whose first ny states are the signals themselves. Fitted on the run's own error over the whole record, by forward
 * sensitivities, so that what matters to a long forecast is what is fitted; one step ahead errors would ask for a good
 * one-step map alone, which drifts when it feeds on itself. Not for the gateway: there, runtime/filter/driven.ts runs.
 */
import { DRIVEN_STATE_LIMIT } from '@stillwell/runtime/filter';
import { addLowerGram } from '../linalg/gram.ts';
import type { LeastSquares, Linearised } from './levenberg-marquardt.ts';

/** Sizes of one member. n = signalCount + hiddenCount. */
export interface MemberShape {
  readonly signalCount: number;
  readonly inputCount: number;
  readonly hiddenCount: number;
  readonly featureCount: number;
}

/** Features, width included. */
export interface MemberFeatures {
  /** (D × (n + nu)) radians per unit */
  readonly frequencies: Float64Array;
  /** (D) radians */
  readonly phases: Float64Array;
}

/** A stretch of record, standardised. */
export interface DrivenRecord {
  /** (ny) of (ticks), NaN where there was no reading. */
  readonly signals: readonly Float64Array[];
  /** (nu) of (ticks), no gaps. */
  readonly inputs: readonly Float64Array[];
  /** First tick run, and the one after the last. */
  readonly from: number;
  readonly to: number;
}

/** Rows of sensitivities whose products are added together. */
const BLOCK = 16;

/** Where the parts of a member's parameters start: L (n × (n + nu + 1)), then W (n × D), then x(from) (n). */
export function parameterLayout(shape: MemberShape): {
  readonly states: number;
  readonly width: number;
  readonly gainAt: number;
  readonly startAt: number;
  readonly count: number;
} {
  const states = shape.signalCount + shape.hiddenCount;
  const width = states + shape.inputCount + 1;
  const gainAt = states * width;
  const startAt = gainAt + states * shape.featureCount;
  return { states, width, gainAt, startAt, count: startAt + states };
}

/**
 * Runs a member free over a stretch.
 *
 * shapes  result (ny) of (to − from); states are clipped to ±DRIVEN_STATE_LIMIT at every step, as on the gateway
 * units   standardised
 * throws  nothing
 * source  file head
 * cost    O(ticks · D (n + nu))
 */
export function freeRun(
  shape: MemberShape,
  features: MemberFeatures,
  parameters: Float64Array,
  record: DrivenRecord,
): Float64Array[] {
  const run = new Run(shape, features);
  run.start(parameters);
  const ticks = record.to - record.from;
  const out = Array.from({ length: shape.signalCount }, () => new Float64Array(ticks));
  for (let t = 0; t < ticks; t++) {
    for (let i = 0; i < shape.signalCount; i++) out[i][t] = run.x[i];
    run.readInputs(record, record.from + t);
    run.step(parameters);
    run.clip();
  }
  return out;
}

/** States of a free run, (n) of (to − from). */
export function stateRun(
  shape: MemberShape,
  features: MemberFeatures,
  parameters: Float64Array,
  record: DrivenRecord,
): Float64Array[] {
  const all = { ...shape, signalCount: shape.signalCount + shape.hiddenCount, hiddenCount: 0 };
  return freeRun(all, features, parameters, record);
}

/**
 * The least-squares problem of a member's free run: ½ Σ (x_i − y_i)² + ½ penalty Σ W².
 *
 * shapes  parameters as parameterLayout says
 * units   standardised
 * throws  nothing
 * source  forward sensitivities: Ljung, System Identification, 2nd ed. (1999), section 7.4 (output error)
 * cost    of a linearisation: O(ticks · (P² ny / 2 + P n²))
 */
export function freeRunProblem(
  shape: MemberShape,
  features: MemberFeatures,
  record: DrivenRecord,
  penalty: number,
): LeastSquares {
  const { states, width, gainAt, startAt, count } = parameterLayout(shape);
  const run = new Run(shape, features);
  const penaltyCost = (parameters: Float64Array): number => {
    let sum = 0;
    for (let k = gainAt; k < startAt; k++) sum += parameters[k] * parameters[k];
    return 0.5 * penalty * sum;
  };
  const cost = (parameters: Float64Array): number => {
    run.start(parameters);
    let sum = 0;
    for (let t = record.from; t < record.to; t++) {
      for (let i = 0; i < shape.signalCount; i++) {
        const error = run.x[i] - record.signals[i][t];
        if (!Number.isNaN(error)) sum += error * error;
      }
      run.readInputs(record, t);
      run.step(parameters);
      if (!run.isInside()) return Number.POSITIVE_INFINITY;
    }
    return 0.5 * sum + penaltyCost(parameters);
  };
  const linearise = (parameters: Float64Array): Linearised => {
    const normal = new Float64Array(count * count);
    const gradient = new Float64Array(count);
    let sensitivity = new Float64Array(states * count);
    let next = new Float64Array(states * count);
    const block = new Float64Array(BLOCK * count);
    for (let i = 0; i < states; i++) sensitivity[i * count + startAt + i] = 1;
    run.start(parameters);
    let sum = 0;
    let rows = 0;
    for (let t = record.from; t < record.to; t++) {
      for (let i = 0; i < shape.signalCount; i++) {
        const error = run.x[i] - record.signals[i][t];
        if (Number.isNaN(error)) continue;
        sum += error * error;
        const row = sensitivity.subarray(i * count, (i + 1) * count);
        for (let p = 0; p < count; p++) gradient[p] += row[p] * error;
        block.set(row, rows++ * count);
        if (rows < BLOCK) continue;
        addLowerGram(normal, block, rows, count);
        rows = 0;
      }
      run.readInputs(record, t);
      run.stepWithSlopes(parameters);
      pushSensitivity(sensitivity, next, run, states, width, gainAt, count, shape.featureCount);
      [sensitivity, next] = [next, sensitivity];
      if (!run.isInside()) return { cost: Number.POSITIVE_INFINITY, normal, gradient };
    }
    addLowerGram(normal, block, rows, count);
    for (let k = gainAt; k < startAt; k++) {
      normal[k * count + k] += penalty;
      gradient[k] += penalty * parameters[k];
    }
    return { cost: 0.5 * sum + penaltyCost(parameters), normal, gradient };
  };
  return { cost, linearise };
}

/** S(t+1) = (∂f/∂x) S(t) + ∂f/∂θ. */
function pushSensitivity(
  from: Float64Array,
  to: Float64Array,
  run: Run,
  states: number,
  width: number,
  gainAt: number,
  count: number,
  featureCount: number,
): void {
  for (let i = 0; i < states; i++) {
    const row = to.subarray(i * count, (i + 1) * count);
    row.fill(0);
    for (let k = 0; k < states; k++) {
      const slope = run.slopes[i * states + k];
      const at = k * count;
      for (let p = 0; p < count; p++) row[p] += slope * from[at + p];
    }
    for (let k = 0; k < width; k++) row[i * width + k] += run.before[k];
    for (let j = 0; j < featureCount; j++) row[gainAt + i * featureCount + j] += run.phi[j];
  }
}

/** The moving parts of one run. */
class Run {
  readonly x: Float64Array;
  /** (n + nu + 1) state, inputs and a one, as they were before the last step. */
  readonly before: Float64Array;
  /** (D) features of that. */
  readonly phi: Float64Array;
  /** (n × n) ∂x(t+1)/∂x(t) of the last step with slopes. */
  readonly slopes: Float64Array;
  readonly #shape: MemberShape;
  readonly #features: MemberFeatures;
  readonly #size: number;

  constructor(shape: MemberShape, features: MemberFeatures) {
    const { states, width } = parameterLayout(shape);
    this.x = new Float64Array(states);
    this.before = new Float64Array(width).fill(1);
    this.phi = new Float64Array(shape.featureCount);
    this.slopes = new Float64Array(states * states);
    this.#shape = shape;
    this.#features = features;
    this.#size = shape.featureCount > 0 ? Math.sqrt(2 / shape.featureCount) : 0;
  }

  start(parameters: Float64Array): void {
    this.x.set(parameters.subarray(parameters.length - this.x.length));
  }

  readInputs(record: DrivenRecord, t: number): void {
    for (let k = 0; k < this.#shape.inputCount; k++) this.before[this.x.length + k] = record.inputs[k][t];
  }

  isInside(): boolean {
    for (let k = 0; k < this.x.length; k++) if (!(Math.abs(this.x[k]) <= DRIVEN_STATE_LIMIT)) return false;
    return true;
  }

  clip(): void {
    for (let k = 0; k < this.x.length; k++) {
      this.x[k] = Math.max(-DRIVEN_STATE_LIMIT, Math.min(DRIVEN_STATE_LIMIT, this.x[k]));
    }
  }

  step(parameters: Float64Array): void {
    this.#advance(parameters, null);
  }

  stepWithSlopes(parameters: Float64Array): void {
    this.#advance(parameters, this.slopes);
  }

  #advance(parameters: Float64Array, slopes: Float64Array | null): void {
    const { x, before, phi } = this;
    const n = x.length;
    const D = phi.length;
    const width = before.length;
    const dims = width - 1;
    before.set(x);
    for (let i = 0; i < n; i++) {
      let sum = 0;
      for (let k = 0; k < width; k++) sum += parameters[i * width + k] * before[k];
      x[i] = sum;
      if (slopes !== null) for (let k = 0; k < n; k++) slopes[i * n + k] = parameters[i * width + k];
    }
    const { frequencies, phases } = this.#features;
    for (let j = 0; j < D; j++) {
      let angle = phases[j];
      for (let k = 0; k < dims; k++) angle += frequencies[j * dims + k] * before[k];
      phi[j] = this.#size * Math.cos(angle);
      const slope = slopes === null ? 0 : -this.#size * Math.sin(angle);
      for (let i = 0; i < n; i++) {
        const gain = parameters[n * width + i * D + j];
        x[i] += gain * phi[j];
        if (slopes === null) continue;
        for (let k = 0; k < n; k++) slopes[i * n + k] += gain * slope * frequencies[j * dims + k];
      }
    }
  }
}
