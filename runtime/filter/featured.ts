/**
 * The featured kind: what the linear map leaves over, by random Fourier features (Rahimi and Recht 2007) of a summary of the
 * past, for plants that are not linear:
 *
 *   summary v = leading predictive states and present values   correction u = P cos(Ω v + b) + offset
 *   coefficients V x + C u                                       path z(t) + B (V x + C u)
 *
 * Far from what was learned a feature means nothing, so the summary is clipped before and the correction after: there the
 * forecast is the linear one with a bounded error. The recursion stays the bank's, so nothing can blow up.
 */
import { cosinesOf } from './cosine-table.ts';
import { multiply } from './dense.ts';
import type { FeaturedModel } from './featured-model.ts';
import type { Kernel } from './kernel.ts';
import { createLinearCore, type LinearCore, linearKernel } from './linear.ts';
import type { LinearModel } from './model.ts';
import { requireField, requireLength, requireWeights, requireWhole } from './requirement.ts';
import type { FilterState } from './state.ts';

/** Largest size of a summary number; in training they have a standard deviation near one. */
export const SUMMARY_LIMIT = 4;
/** Largest size of a correction, in standard deviations of the training's. */
export const CORRECTION_LIMIT = 4;

/** Buffers of the linear kind, and of the correction. */
export interface FeaturedCore extends LinearCore {
  /** (q) */
  readonly summary: Float64Array;
  /** (D) */
  readonly random: Float64Array;
  /** (k) */
  readonly correction: Float64Array;
  /** (ny·r) */
  readonly added: Float64Array;
}

/** The bank, its read-out and its memories are the linear kind's own. */
const asLinear = (model: FeaturedModel): LinearModel => model as unknown as LinearModel;

function createCore(model: FeaturedModel): FeaturedCore {
  return {
    ...createLinearCore(model),
    summary: new Float64Array(model.summaryStates + model.summaryChannels.length),
    random: new Float64Array(model.randomCount),
    correction: new Float64Array(model.correctionCount),
    added: new Float64Array(model.signalCount * model.basisCount),
  };
}

/**
 * Writes the summary of the past that the features see, clipped.
 *
 * shapes  x (d), value (nc), out (q)
 * units   standardised
 * cost    O(q); allocates nothing
 */
export function writeSummary(
  summaryStates: number,
  summaryChannels: Int32Array,
  x: Float64Array,
  value: Float64Array,
  out: Float64Array,
): void {
  for (let k = 0; k < out.length; k++) {
    const v = k < summaryStates ? x[k] : value[summaryChannels[k - summaryStates]];
    out[k] = v > SUMMARY_LIMIT ? SUMMARY_LIMIT : Math.max(v, -SUMMARY_LIMIT);
  }
}

function refresh(model: FeaturedModel, core: FeaturedCore, state: FilterState): void {
  linearKernel.refresh(asLinear(model), core, state);
  const { summary, random, correction, added, coefficients } = core;
  const D = model.randomCount;
  writeSummary(model.summaryStates, model.summaryChannels, core.x, state.value, summary);
  multiply(model.frequencies, D, summary.length, summary, 0, random, 0);
  for (let j = 0; j < D; j++) random[j] += model.phases[j];
  cosinesOf(random, D);
  multiply(model.projection, correction.length, D, random, 0, correction, 0);
  for (let k = 0; k < correction.length; k++) {
    const u = correction[k] + model.offset[k];
    correction[k] = u > CORRECTION_LIMIT ? CORRECTION_LIMIT : Math.max(u, -CORRECTION_LIMIT);
  }
  multiply(model.correctionReadout, added.length, correction.length, correction, 0, added, 0);
  for (let k = 0; k < coefficients.length; k++) coefficients[k] += added[k];
}

function check(model: FeaturedModel): void {
  linearKernel.check(asLinear(model));
  const { channelCount: nc, summaryStates, summaryChannels, randomCount: D, correctionCount } = model;
  requireWhole(summaryStates, 'summaryStates', 0, model.order);
  requireWhole(D, 'randomCount', 1, 1e6);
  requireWhole(correctionCount, 'correctionCount', 1, 4096);
  for (let k = 0; k < summaryChannels.length; k++) {
    const least = k === 0 ? 0 : summaryChannels[k - 1] + 1;
    const c = summaryChannels[k];
    requireField(c >= least && c < nc, `summaryChannels[${k}]`, `ascending, ${least} to ${nc - 1}`, c);
  }
  const q = summaryStates + summaryChannels.length;
  requireField(q > 0, 'summaryStates', 'at least one state or channel', 0);
  requireLength(model.frequencies, 'frequencies', D * q);
  requireLength(model.phases, 'phases', D);
  requireLength(model.projection, 'projection', correctionCount * D);
  requireLength(model.offset, 'offset', correctionCount);
  requireLength(model.correctionReadout, 'correctionReadout', model.signalCount * model.basisCount * correctionCount);
  for (const name of ['frequencies', 'phases', 'projection', 'offset', 'correctionReadout'] as const) {
    requireWeights(model[name], name);
  }
}

/** The kernel of the featured kind. */
export const featuredKernel: Kernel<FeaturedModel, FeaturedCore> = {
  check,
  fingerprint: (model) => linearKernel.fingerprint(asLinear(model)),
  settlingTicks: (model) => linearKernel.settlingTicks(asLinear(model)),
  createCore,
  memoryLayout: (model) => linearKernel.memoryLayout(asLinear(model)),
  copyOut: (model, core, channel, out, at) => linearKernel.copyOut(asLinear(model), core, channel, out, at),
  copyIn: (model, core, channel, from, at) => linearKernel.copyIn(asLinear(model), core, channel, from, at),
  beforeTick: (model, core, state) => linearKernel.beforeTick(asLinear(model), core, state),
  settle: (model, core, state, channel) => linearKernel.settle(asLinear(model), core, state, channel),
  advance: (model, core, state, channel) => linearKernel.advance(asLinear(model), core, state, channel),
  refresh,
  paths: (model, core, state, steps, plan, out) => linearKernel.paths(asLinear(model), core, state, steps, plan, out),
};
