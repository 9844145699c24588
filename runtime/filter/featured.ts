/**
 * The featured kind: what the linear map leaves over, by random Fourier features (Rahimi and Recht 2007) of a summary of the
 * past, for plants that are not linear:
 *
 *   summary v = leading predictive states, values now and before   correction u = P [x; cos(Ω v + b)] + offset
 *   coefficients V x + C u                                       path z(t) + B (V x + C u)
 *
 * The state stands beside the features, so that where they know better the linear map's own part can be taken back. Far from
 * what was learned a feature means nothing, so the summary is clipped before and the correction after: there the
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

/** Longest lag of a summary, ticks. */
const LONGEST_LAG = 1024;

/** Buffers of the linear kind, and of the correction. */
export interface FeaturedCore extends LinearCore {
  /** (nc × L) value 1 … L ticks ago, L the longest lag of the summary */
  readonly past: Float64Array;
  /** (q) */
  readonly summary: Float64Array;
  /** (d + D) predictive state, clipped, and features */
  readonly regressors: Float64Array;
  /** (D) the latter part of them */
  readonly random: Float64Array;
  /** (k) */
  readonly correction: Float64Array;
  /** (ny·r) */
  readonly added: Float64Array;
}

/** The bank, its read-out and its memories are the linear kind's own. */
const asLinear = (model: FeaturedModel): LinearModel => model as unknown as LinearModel;

function createCore(model: FeaturedModel): FeaturedCore {
  const regressors = new Float64Array(model.order + model.randomCount);
  return {
    ...createLinearCore(model),
    past: new Float64Array(model.channelCount * pastLength(model)),
    summary: new Float64Array(summaryLength(model)),
    regressors,
    random: regressors.subarray(model.order),
    correction: new Float64Array(model.correctionCount),
    added: new Float64Array(model.signalCount * model.basisCount),
  };
}

function pastLength({ summaryLags }: FeaturedModel): number {
  return summaryLags.length === 0 ? 0 : summaryLags[summaryLags.length - 1];
}

function summaryLength({ summaryStates, summaryChannels, summaryLags }: FeaturedModel): number {
  return summaryStates + summaryChannels.length * (1 + summaryLags.length);
}

function beforeTick(model: FeaturedModel, core: FeaturedCore, state: FilterState): void {
  linearKernel.beforeTick(asLinear(model), core, state);
  const L = pastLength(model);
  if (L === 0) return;
  core.past.copyWithin(1, 0, core.past.length - 1);
  for (let c = 0; c < model.channelCount; c++) core.past[c * L] = state.value[c];
}

function settle(model: FeaturedModel, core: FeaturedCore, state: FilterState, channel: number): void {
  linearKernel.settle(asLinear(model), core, state, channel);
  const L = pastLength(model);
  core.past.fill(state.value[channel], channel * L, (channel + 1) * L);
}

/** Writes the summary of the past that the features see, clipped. */
function writeSummary(model: FeaturedModel, core: FeaturedCore, state: FilterState): void {
  const { summaryStates, summaryChannels, summaryLags } = model;
  const { summary, past, x } = core;
  const L = pastLength(model);
  let k = 0;
  for (; k < summaryStates; k++) summary[k] = x[k];
  for (let c = 0; c < summaryChannels.length; c++) summary[k++] = state.value[summaryChannels[c]];
  for (let l = 0; l < summaryLags.length; l++) {
    for (let c = 0; c < summaryChannels.length; c++) summary[k++] = past[summaryChannels[c] * L + summaryLags[l] - 1];
  }
  for (let j = 0; j < k; j++) summary[j] = Math.min(SUMMARY_LIMIT, Math.max(-SUMMARY_LIMIT, summary[j]));
}

function refresh(model: FeaturedModel, core: FeaturedCore, state: FilterState): void {
  linearKernel.refresh(asLinear(model), core, state);
  const { summary, regressors, random, correction, added, coefficients, x } = core;
  const D = model.randomCount;
  writeSummary(model, core, state);
  multiply(model.frequencies, D, summary.length, summary, 0, random, 0);
  for (let j = 0; j < D; j++) random[j] += model.phases[j];
  cosinesOf(random, D);
  for (let k = 0; k < x.length; k++) regressors[k] = Math.min(SUMMARY_LIMIT, Math.max(-SUMMARY_LIMIT, x[k]));
  multiply(model.projection, correction.length, regressors.length, regressors, 0, correction, 0);
  for (let k = 0; k < correction.length; k++) {
    const u = correction[k] + model.offset[k];
    correction[k] = u > CORRECTION_LIMIT ? CORRECTION_LIMIT : Math.max(u, -CORRECTION_LIMIT);
  }
  multiply(model.correctionReadout, added.length, correction.length, correction, 0, added, 0);
  for (let k = 0; k < coefficients.length; k++) coefficients[k] += added[k];
}

function check(model: FeaturedModel): void {
  linearKernel.check(asLinear(model));
  const { channelCount: nc, summaryStates, summaryChannels, summaryLags, randomCount: D, correctionCount } = model;
  requireWhole(summaryStates, 'summaryStates', 0, model.order);
  requireWhole(D, 'randomCount', 1, 1e6);
  requireWhole(correctionCount, 'correctionCount', 1, 4096);
  for (let k = 0; k < summaryChannels.length; k++) {
    const least = k === 0 ? 0 : summaryChannels[k - 1] + 1;
    const c = summaryChannels[k];
    requireField(c >= least && c < nc, `summaryChannels[${k}]`, `ascending, ${least} to ${nc - 1}`, c);
  }
  for (let k = 0; k < summaryLags.length; k++) {
    const least = k === 0 ? 1 : summaryLags[k - 1] + 1;
    const lag = summaryLags[k];
    requireField(lag >= least && lag <= LONGEST_LAG, `summaryLags[${k}]`, `ascending, ${least} to ${LONGEST_LAG}`, lag);
  }
  const q = summaryLength(model);
  requireField(q > 0, 'summaryStates', 'at least one state or channel', 0);
  requireLength(model.frequencies, 'frequencies', D * q);
  requireLength(model.phases, 'phases', D);
  requireLength(model.projection, 'projection', correctionCount * (model.order + D));
  requireLength(model.offset, 'offset', correctionCount);
  requireLength(model.correctionReadout, 'correctionReadout', model.signalCount * model.basisCount * correctionCount);
  for (const name of ['frequencies', 'phases', 'projection', 'offset', 'correctionReadout'] as const) {
    requireWeights(model[name], name);
  }
}

/** The kernel of the featured kind. */
export const featuredKernel: Kernel<FeaturedModel, FeaturedCore> = {
  check,
  fingerprint: (model) => [...linearKernel.fingerprint(asLinear(model)), Float64Array.from(model.summaryLags)],
  settlingTicks: (model) => linearKernel.settlingTicks(asLinear(model)),
  createCore,
  memoryLayout: (model) => {
    const { perChannel, shared } = linearKernel.memoryLayout(asLinear(model));
    return { perChannel: perChannel + pastLength(model), shared };
  },
  copyOut: (model, core, channel, out, at) => {
    linearKernel.copyOut(asLinear(model), core, channel, out, at);
    if (channel < 0) return;
    const L = pastLength(model);
    const { perChannel } = linearKernel.memoryLayout(asLinear(model));
    out.set(core.past.subarray(channel * L, (channel + 1) * L), at + perChannel);
  },
  copyIn: (model, core, channel, from, at) => {
    linearKernel.copyIn(asLinear(model), core, channel, from, at);
    if (channel < 0) return;
    const L = pastLength(model);
    const start = at + linearKernel.memoryLayout(asLinear(model)).perChannel;
    core.past.set(from.subarray(start, start + L), channel * L);
  },
  beforeTick,
  settle,
  bridge: (model, core, channel, missed, step) => linearKernel.bridge?.(asLinear(model), core, channel, missed, step),
  advance: (model, core, state, channel) => linearKernel.advance(asLinear(model), core, state, channel),
  isDerived: true,
  refresh,
  own: { count: (model) => model.featureCount, features: (core) => core.features },
  paths: (model, core, state, steps, plan, out) => linearKernel.paths(asLinear(model), core, state, steps, plan, out),
};
