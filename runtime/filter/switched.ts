/**
 * The switched kind: the linear kind, whose bank and read-out still forecast every signal that the equipment does not move,
 * and a section that rolls out the plant by modes for those it does. See switched-section.ts for the plant it assumes,
 * switched-step.ts for what is remembered, switched-paths.ts for the roll-outs.
 */
import type { Kernel } from './kernel.ts';
import { type LinearCore, linearKernel } from './linear.ts';
import type { LinearModel } from './model.ts';
import type { FilterState } from './state.ts';
import { checkSwitched } from './switched-check.ts';
import { type CorrectionBuffers, correct, createCorrection } from './switched-correction.ts';
import type { SwitchedModel } from './switched-model.ts';
import { createRollout, PATHS, type Rollout, rollOut } from './switched-paths.ts';
import { createSwitchedCore, deriveSwitched, type SwitchedCore, settleInput, stepSwitched } from './switched-step.ts';

/** Buffers of the switched kind. */
export interface SwitchedKernelCore extends LinearCore {
  readonly section: SwitchedCore;
  readonly rollout: Rollout;
  readonly correction: CorrectionBuffers;
  /** Whether a tick has been folded in that the section has not seen: a refresh after a restore must not move it. */
  isDue: boolean;
}

/** The bank under the section; the linear kernel never looks at `kind`. */
const asLinear = (model: SwitchedModel): LinearModel => model as unknown as LinearModel;

function createCore(model: SwitchedModel): SwitchedKernelCore {
  const { switched, horizon, mean, scale } = model;
  const standardised = (values: Float64Array): Float64Array => values.map((v, c) => (v - mean[c]) / scale[c]);
  return {
    ...linearKernel.createCore(asLinear(model)),
    section: createSwitchedCore(switched),
    rollout: createRollout(switched, horizon, standardised(model.clipLow), standardised(model.clipHigh)),
    correction: createCorrection(switched, switched.correction.count, horizon),
    isDue: false,
  };
}

function beforeTick(model: SwitchedModel, core: SwitchedKernelCore, state: FilterState): void {
  linearKernel.beforeTick(asLinear(model), core, state);
  const { driven } = model.switched;
  for (let i = 0; i < driven.length; i++) {
    core.section.previous[i] = state.value[driven[i]];
    core.section.wasRead[i] = state.age[driven[i]] === 0 ? 1 : 0;
  }
}

function refresh(model: SwitchedModel, core: SwitchedKernelCore, state: FilterState): void {
  linearKernel.refresh(asLinear(model), core, state);
  const { switched } = model;
  if (core.isDue) stepSwitched(switched, core.section, state.tick, state.value, state.observed);
  core.isDue = false;
  deriveSwitched(switched, core.section, state.tick, state.value);
}

function paths(
  model: SwitchedModel,
  core: SwitchedKernelCore,
  state: FilterState,
  steps: number,
  plan: Float64Array | null,
  out: Float64Array,
): void {
  linearKernel.paths(asLinear(model), core, state, steps, plan, out);
  const { switched, horizon } = model;
  const { section, rollout } = core;
  const n = switched.driven.length;
  rollOut(switched, section, rollout, state.tick, state.value, horizon, steps);
  for (let q = 0; q < switched.forecast.length; q++) {
    const channel = switched.forecast[q];
    let row = 0;
    while (row < n && switched.driven[row] !== channel) row++;
    if (row === n) while (switched.discrete[row - n] !== channel) row++;
    const at = channel * steps;
    for (let h = 0; h < steps; h++) {
      const share = switched.share[q * horizon + h];
      out[at + h] += share * (rollout.sums[row * horizon + h] - out[at + h]);
    }
  }
  correct(switched, section, core.correction, state.value, horizon, steps, out);
}

function copyOut(model: SwitchedModel, core: SwitchedKernelCore, channel: number, out: Float64Array, at: number): void {
  if (channel >= 0) linearKernel.copyOut(asLinear(model), core, channel, out, at);
  else out.set(core.section.memory, at);
}

function copyIn(model: SwitchedModel, core: SwitchedKernelCore, channel: number, from: Float64Array, at: number): void {
  if (channel >= 0) {
    linearKernel.copyIn(asLinear(model), core, channel, from, at);
    return;
  }
  const { memory, modeAt, dwellAt } = core.section;
  memory.set(from.subarray(at, at + memory.length));
  // A damaged snapshot may hold any number: a mode is an index.
  const mode = Math.floor(memory[modeAt]);
  memory[modeAt] = mode >= 0 && mode < model.switched.modeCount ? mode : 0;
  memory[dwellAt] = Math.min(model.switched.dwellLimit, Math.max(0, memory[dwellAt]));
  core.isDue = false;
}

/** The kernel of the switched kind. */
export const switchedKernel: Kernel<SwitchedModel, SwitchedKernelCore> = {
  check(model) {
    linearKernel.check(asLinear(model));
    checkSwitched(model, model.switched);
  },
  fingerprint: (model) => [
    ...linearKernel.fingerprint(asLinear(model)),
    Float64Array.from(model.switched.discrete),
    Float64Array.from(model.switched.driven),
    Float64Array.from(model.switched.inputs),
    Float64Array.of(model.switched.modeCount, model.switched.dwellLimit),
    model.switched.decays,
    model.switched.centre,
  ],
  settlingTicks: (model) => {
    let slowest = 0;
    for (const decay of model.switched.decays) slowest = Math.max(slowest, decay);
    return Math.max(linearKernel.settlingTicks(asLinear(model)), Math.ceil(4 / (1 - slowest)));
  },
  createCore,
  memoryLayout: (model) => ({
    perChannel: linearKernel.memoryLayout(asLinear(model)).perChannel,
    shared: createSwitchedCore(model.switched).memory.length,
  }),
  copyOut,
  copyIn,
  beforeTick,
  settle(model, core, state, channel) {
    linearKernel.settle(asLinear(model), core, state, channel);
    settleInput(model.switched, core.section, channel, state.value);
    core.isDue = true;
  },
  bridge: (model, core, channel, missed, step) => linearKernel.bridge?.(asLinear(model), core, channel, missed, step),
  advance(model, core, state, channel) {
    linearKernel.advance(asLinear(model), core, state, channel);
    core.isDue = true;
  },
  refresh,
  draws: {
    count: PATHS,
    away: (core) => core.rollout.away,
    place: (model, signal) => model.switched.forecast.indexOf(signal),
  },
  paths,
};
