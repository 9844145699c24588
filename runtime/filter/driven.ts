/**
 * The driven kind: plants whose inputs make the signals. A simulation runs along with the inputs and never looks at the
 * readings; a forecast is its path on, under the planned inputs where there is a plan, plus the present deviation of the
 * readings from the simulation, which fades as it was learned to:
 *
 *   path(h) = simulated(t+h) + Σ_j c_j ρ_j^h,   c = G [e; means of e]   with e = z − simulated, means over several times
 *
 * An input without a plan is led on likewise, u(t+k) = u(t) + Σ_j c_j (1 − ρ_j^k), c = Gᵤ [−u; means of u − u]; after the last
 * step of a plan it holds. Deviation and inputs decay whatever the readings are, and the simulation is clipped.
 */
import type { DrivenModel } from './driven-model.ts';
import { createStepBuffers, type StepBuffers, simulatedSignals, stepMembers } from './driven-step.ts';
import type { Core, Kernel } from './kernel.ts';
import { requireEach, requireField, requireLength, requireWeights, requireWhole } from './requirement.ts';
import type { FilterState } from './state.ts';

/** Buffers of the driven kind. */
export interface DrivenCore extends Core {
  readonly step: StepBuffers;
  /** (ny) simulated at this tick */
  readonly simulated: Float64Array;
  /** (nc × K) means: of the deviation for a signal, of the value for an input */
  readonly means: Float64Array;
  /** (nc × J) c of each signal's deviation and each input */
  readonly fading: Float64Array;
  /** (S·n) states of the path under way */
  readonly ahead: Float64Array;
  /** (ny) simulated at the step under way */
  readonly output: Float64Array;
  /** (nu) inputs of the step under way */
  readonly inputs: Float64Array;
  /** (nu) last planned value of the path under way, NaN before one */
  readonly planned: Float64Array;
  /** (J) ρ^h of the step under way */
  readonly powers: Float64Array;
  /** (1 + K) */
  readonly cues: Float64Array;
}

function createCore(model: DrivenModel): DrivenCore {
  const { channelCount: nc, signalCount: ny, order } = model;
  const J = model.fadeDecays.length;
  const K = model.meanDecays.length;
  return {
    x: new Float64Array(order),
    step: createStepBuffers(model),
    simulated: new Float64Array(ny),
    means: new Float64Array(nc * K),
    fading: new Float64Array(nc * J),
    ahead: new Float64Array(order),
    output: new Float64Array(ny),
    inputs: new Float64Array(nc - ny),
    planned: new Float64Array(nc - ny),
    powers: new Float64Array(J),
    cues: new Float64Array(1 + K),
  };
}

function beforeTick(model: DrivenModel, core: DrivenCore, state: FilterState): void {
  stepMembers(core.step, core.x, state.value, model.signalCount);
  simulatedSignals(model, core.x, core.simulated);
}

/** The simulation takes a signal's first reading as its own, and hidden states from what has been read so far. */
function settle(model: DrivenModel, core: DrivenCore, state: FilterState, channel: number): void {
  const { signalCount: ny, channelCount: nc, hiddenCount } = model;
  const n = ny + hiddenCount;
  const width = nc + 1;
  const K = model.meanDecays.length;
  for (let s = 0; s < model.memberCount; s++) {
    if (channel < ny) core.x[s * n + channel] = state.value[channel];
    for (let k = 0; k < hiddenCount; k++) {
      const row = (s * hiddenCount + k) * width;
      let sum = model.start[row + nc];
      for (let c = 0; c < nc; c++) sum += model.start[row + c] * state.value[c];
      core.x[s * n + ny + k] = sum;
    }
  }
  simulatedSignals(model, core.x, core.simulated);
  const settled = channel < ny ? state.value[channel] - core.simulated[channel] : state.value[channel];
  for (let k = 0; k < K; k++) core.means[channel * K + k] = settled;
}

function advance(model: DrivenModel, core: DrivenCore, state: FilterState, channel: number): void {
  const value = state.value[channel];
  const latest = channel < model.signalCount ? value - core.simulated[channel] : value;
  const K = model.meanDecays.length;
  for (let k = 0, m = channel * K; k < K; k++, m++) {
    const decay = model.meanDecays[k];
    core.means[m] = decay * core.means[m] + (1 - decay) * latest;
  }
}

/** Coefficients of what fades, from deviations, inputs and their means. */
function refresh(model: DrivenModel, core: DrivenCore, state: FilterState): void {
  const { signalCount: ny, channelCount: nc } = model;
  const J = model.fadeDecays.length;
  const K = model.meanDecays.length;
  const { cues, means, fading } = core;
  simulatedSignals(model, core.x, core.simulated);
  for (let c = 0; c < nc; c++) {
    const value = state.value[c];
    const isSignal = c < ny;
    cues[0] = isSignal ? value - core.simulated[c] : -value;
    for (let k = 0; k < K; k++) cues[1 + k] = isSignal ? means[c * K + k] : means[c * K + k] - value;
    const gain = isSignal ? model.deviationGain : model.inputGain;
    const row = isSignal ? c * J : (c - ny) * J;
    for (let j = 0; j < J; j++) {
      let sum = 0;
      for (let k = 0; k <= K; k++) sum += gain[(row + j) * (1 + K) + k] * cues[k];
      fading[c * J + j] = sum;
    }
  }
}

/** Inputs of step k ahead of the origin: planned, held after a plan, or led on as learned. */
function inputsAhead(
  model: DrivenModel,
  core: DrivenCore,
  state: FilterState,
  k: number,
  plan: Float64Array | null,
): void {
  const ny = model.signalCount;
  const J = model.fadeDecays.length;
  for (let u = 0; u < core.inputs.length; u++) {
    const asked = plan === null || k === 0 ? Number.NaN : plan[u * model.horizon + k - 1];
    if (!Number.isNaN(asked)) core.planned[u] = asked;
    if (!Number.isNaN(core.planned[u])) {
      core.inputs[u] = core.planned[u];
      continue;
    }
    let value = state.value[ny + u];
    for (let j = 0; j < J; j++) value += core.fading[(ny + u) * J + j] * (1 - core.powers[j]);
    const low = state.low[ny + u];
    const high = state.high[ny + u];
    core.inputs[u] = value > high ? high : Math.max(value, low);
  }
}

function paths(
  model: DrivenModel,
  core: DrivenCore,
  state: FilterState,
  steps: number,
  plan: Float64Array | null,
  out: Float64Array,
): void {
  const { signalCount: ny, fadeDecays } = model;
  const J = fadeDecays.length;
  const { ahead, powers, fading } = core;
  ahead.set(core.x);
  powers.fill(1);
  core.planned.fill(Number.NaN);
  for (let h = 1; h <= steps; h++) {
    inputsAhead(model, core, state, h - 1, plan);
    stepMembers(core.step, ahead, core.inputs, 0);
    simulatedSignals(model, ahead, core.output);
    for (let j = 0; j < J; j++) powers[j] *= fadeDecays[j];
    for (let i = 0; i < ny; i++) {
      let value = core.output[i];
      for (let j = 0; j < J; j++) value += fading[i * J + j] * powers[j];
      out[i * steps + h - 1] = value;
    }
  }
}

function check(model: DrivenModel): void {
  const { channelCount: nc, signalCount: ny, hiddenCount, memberCount: S, randomCount: D } = model;
  const nu = nc - ny;
  requireWhole(nu, 'inputCount', 1, 4096);
  requireWhole(S, 'memberCount', 1, 64);
  requireWhole(hiddenCount, 'hiddenCount', 0, 64);
  requireWhole(D, 'randomCount', 1, 4096);
  requireWhole(model.settleTicks, 'settleTicks', 0, 1e9);
  const n = ny + hiddenCount;
  const J = model.fadeDecays.length;
  const K = model.meanDecays.length;
  requireField(model.order === S * n, 'order', `members × states = ${S * n}`, model.order);
  requireLength(model.linear, 'linear', S * n * (n + nu + 1));
  requireLength(model.featureGain, 'featureGain', S * n * D);
  requireLength(model.frequencies, 'frequencies', S * D * (n + nu));
  requireLength(model.phases, 'phases', S * D);
  requireLength(model.start, 'start', S * hiddenCount * (nc + 1));
  requireLength(model.outputLow, 'outputLow', ny);
  requireLength(model.outputHigh, 'outputHigh', ny);
  requireLength(model.deviationGain, 'deviationGain', ny * J * (1 + K));
  requireLength(model.inputGain, 'inputGain', nu * J * (1 + K));
  for (const name of ['fadeDecays', 'meanDecays'] as const) {
    requireEach(model[name], name, (value) => value > 0 && value < 1, 'more than 0 and less than 1');
  }
  for (const name of ['linear', 'featureGain', 'frequencies', 'phases', 'start', 'deviationGain', 'inputGain'] as const)
    requireWeights(model[name], name);
  for (let i = 0; i < ny; i++) {
    const [low, high] = [model.outputLow[i], model.outputHigh[i]];
    requireField(low < high && high - low < 1e6, `outputHigh[${i}]`, `a finite number above outputLow, ${low}`, high);
  }
}

function copyOut(model: DrivenModel, core: DrivenCore, channel: number, out: Float64Array, at: number): void {
  const K = model.meanDecays.length;
  out.set(channel < 0 ? core.x : core.means.subarray(channel * K, (channel + 1) * K), at);
}

function copyIn(model: DrivenModel, core: DrivenCore, channel: number, from: Float64Array, at: number): void {
  const K = model.meanDecays.length;
  if (channel < 0) core.x.set(from.subarray(at, at + core.x.length));
  else core.means.set(from.subarray(at, at + K), channel * K);
}

/** The kernel of the driven kind. */
export const drivenKernel: Kernel<DrivenModel, DrivenCore> = {
  check,
  fingerprint: (model) => [model.linear, model.featureGain, model.frequencies, model.meanDecays],
  settlingTicks: (model) => model.settleTicks,
  createCore,
  memoryLayout: (model) => ({ perChannel: model.meanDecays.length, shared: model.order }),
  copyOut,
  copyIn,
  beforeTick,
  settle,
  advance,
  refresh,
  paths,
};
