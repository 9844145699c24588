/**
 * One step of the driven kind's simulation: an ensemble of small state spaces with random features, all fed with the same
 * inputs. States are clipped widely at every step, so no run leaves the finite numbers whatever feeds it.
 */
import { cosinesOf } from './cosine-table.ts';
import { multiply } from './dense.ts';
import type { DrivenModel } from './driven-model.ts';

/** Largest size of a state, standardised: several times what training shows. */
export const DRIVEN_STATE_LIMIT = 10;

/** One member's matrices, views into the model's. */
interface Member {
  /** (n × (n + nu + 1)) */
  readonly linear: Float64Array;
  /** (n × D) */
  readonly gain: Float64Array;
  /** (D × (n + nu)) turns */
  readonly frequencies: Float64Array;
  /** (D) turns */
  readonly phases: Float64Array;
}

/** Buffers of a step. */
export interface StepBuffers {
  readonly members: readonly Member[];
  /** (n + nu + 1) a member's state, the inputs, a one */
  readonly argument: Float64Array;
  /** (D) */
  readonly angles: Float64Array;
  /** (n) each */
  readonly straight: Float64Array;
  readonly bent: Float64Array;
}

/** Allocates the buffers. */
export function createStepBuffers(model: DrivenModel): StepBuffers {
  const n = model.signalCount + model.hiddenCount;
  const nu = model.channelCount - model.signalCount;
  const D = model.randomCount;
  const part = (all: Float64Array, size: number, s: number): Float64Array => all.subarray(s * size, (s + 1) * size);
  return {
    members: Array.from({ length: model.memberCount }, (_, s) => ({
      linear: part(model.linear, n * (n + nu + 1), s),
      gain: part(model.featureGain, n * D, s),
      frequencies: part(model.frequencies, D * (n + nu), s),
      phases: part(model.phases, D, s),
    })),
    argument: new Float64Array(n + nu + 1).fill(1),
    angles: new Float64Array(D),
    straight: new Float64Array(n),
    bent: new Float64Array(n),
  };
}

/**
 * Moves every member's state one tick on: x ← L [x; u; 1] + G cos(Ω [x; u] + b), clipped to ±DRIVEN_STATE_LIMIT.
 *
 * shapes  x (members · n), in place; inputs (nu numbers from inputsAt)
 * units   standardised
 * cost    O(members · D (2n + nu)); allocates nothing
 */
export function stepMembers(buffers: StepBuffers, x: Float64Array, inputs: Float64Array, inputsAt: number): void {
  const { members, argument, angles, straight, bent } = buffers;
  const n = straight.length;
  const width = argument.length;
  const D = angles.length;
  for (let k = n; k < width - 1; k++) argument[k] = inputs[inputsAt + k - n];
  for (let s = 0; s < members.length; s++) {
    const { linear, gain, frequencies, phases } = members[s];
    const at = s * n;
    for (let k = 0; k < n; k++) argument[k] = x[at + k];
    multiply(linear, n, width, argument, 0, straight, 0);
    multiply(frequencies, D, width - 1, argument, 0, angles, 0);
    for (let j = 0; j < D; j++) angles[j] += phases[j];
    cosinesOf(angles, D);
    multiply(gain, n, D, angles, 0, bent, 0);
    for (let k = 0; k < n; k++) {
      const next = straight[k] + bent[k];
      x[at + k] = next > DRIVEN_STATE_LIMIT ? DRIVEN_STATE_LIMIT : Math.max(next, -DRIVEN_STATE_LIMIT);
    }
  }
}

/**
 * Mean over the members of each signal as simulated, clipped to what the sensor can show.
 *
 * shapes  x (members · n), out (ny)
 * units   standardised
 * cost    O(members · ny); allocates nothing
 */
export function simulatedSignals(model: DrivenModel, x: Float64Array, out: Float64Array): void {
  const n = model.signalCount + model.hiddenCount;
  for (let i = 0; i < model.signalCount; i++) {
    const low = model.outputLow[i];
    const high = model.outputHigh[i];
    let sum = 0;
    for (let s = 0; s < model.memberCount; s++) {
      const value = x[s * n + i];
      sum += value > high ? high : Math.max(value, low);
    }
    out[i] = sum / model.memberCount;
  }
}
