/**
 * The dense kind: a small recursion x⁺ = A x + B Δ on the changes Δ = z(t) − z(t − 1) of all channels, path z(t) + basis ·
 * (V x). All channels share its few numbers, so a tick costs a fraction of the bank's. A is kept by its poles, complex ones
 * as pairs of numbers: whether it forgets is then read off, on any gateway, and no product of it can blow up. Changes of
 * level alone reach the state, so a constant past gives zeros, whatever the level; where a plant returns to its mean, the
 * read-out may see the levels as well. What single readings say of the next few steps, no recursion of few numbers keeps:
 * a ring of each signal's past adds Σ weight · (z(t − lag) − z(t)) to those.
 *
 *   pair (u, v), pole a + ib    u ← a u − b v,  v ← a v + b u      real number w, pole a    w ← a w      then + B Δ
 *
 * Numbers are clipped to ±STATE_LIMIT; each has a standard deviation of one in training.
 */
import { multiply } from './dense.ts';
import type { Core, Kernel } from './kernel.ts';
import type { DenseModel } from './model.ts';
import { requireEach, requireField, requireLength, requireWeights, requireWhole } from './requirement.ts';
import type { FilterState } from './state.ts';

/** Largest size of a number of the state. */
const STATE_LIMIT = 40;

/**
 * Buffers of the recursion.
 *
 * shapes  nc channels, ny signals, d order, r basis
 * units   standardised
 */
export interface DenseCore extends Core {
  /** (d), or (d + nc) with the level: the state, then −z of every channel: what the read-out sees. */
  readonly seen: Float64Array;
  /** (nc) values of the tick before. */
  readonly last: Float64Array;
  /** (ny × ringLength) past values of each signal. */
  readonly ring: Float64Array;
  readonly ringLength: number;
  /** Slot of every ring that holds the oldest value. */
  ringAt: number;
  /** (ny × lags) z(t − lag) − z(t) */
  readonly lagged: Float64Array;
  /** (nc × d) what a change of each channel adds: B, a row a channel. */
  readonly drive: Float64Array;
  /** (ny × seen) read-out of the first step, worked out once. */
  readonly firstStep: Float64Array;
  /** (ny) */
  readonly firstChange: Float64Array;
  /** (ny·r) */
  readonly coefficients: Float64Array;
}

function longestLag({ lags }: DenseModel): number {
  return lags.length === 0 ? 0 : lags[lags.length - 1];
}

/** Numbers that the read-out sees. */
function seenCount({ order, channelCount, hasLevel }: DenseModel): number {
  return order + (hasLevel === true ? channelCount : 0);
}

function createCore(model: DenseModel): DenseCore {
  const { channelCount: nc, signalCount: ny, order: d, basisCount: r } = model;
  const drive = new Float64Array(nc * d);
  for (let k = 0; k < d; k++) for (let c = 0; c < nc; c++) drive[c * d + k] = model.drive[k * nc + c];
  const n = seenCount(model);
  const firstStep = new Float64Array(ny * n);
  for (let i = 0; i < ny; i++) {
    for (let b = 0; b < r; b++) {
      const weight = model.horizonBasis[b];
      for (let k = 0; k < n; k++) firstStep[i * n + k] += weight * model.readout[(i * r + b) * n + k];
    }
  }
  const seen = new Float64Array(n);
  const ringLength = longestLag(model);
  return {
    x: seen.subarray(0, d),
    seen,
    last: new Float64Array(nc),
    ring: new Float64Array(ny * ringLength),
    ringLength,
    ringAt: 0,
    lagged: new Float64Array(ny * model.lags.length),
    drive,
    firstStep,
    firstChange: new Float64Array(ny),
    coefficients: new Float64Array(ny * r),
  };
}

/** x ← A x, and the values of the tick before put by: for their changes, and into every ring over the oldest. */
function beforeTick(model: DenseModel, core: DenseCore, state: FilterState): void {
  const { poles, pairCount, order } = model;
  const { x, last } = core;
  for (let c = 0; c < last.length; c++) last[c] = state.rest[c];
  let k = 0;
  for (let pair = 0; pair < pairCount; pair++, k += 2) {
    const u = x[k];
    const v = x[k + 1];
    x[k] = poles[k] * u - poles[k + 1] * v;
    x[k + 1] = poles[k] * v + poles[k + 1] * u;
  }
  for (; k < order; k++) x[k] = poles[k] * x[k];
  if (core.ringLength === 0) return;
  for (let i = 0; i < model.signalCount; i++) core.ring[i * core.ringLength + core.ringAt] = last[i];
  core.ringAt = core.ringAt + 1 === core.ringLength ? 0 : core.ringAt + 1;
}

/** A past that always was the present value: no changes, and a ring full of it. */
function settle(model: DenseModel, { ring, ringLength }: DenseCore, state: FilterState, channel: number): void {
  if (channel >= model.signalCount) return;
  for (let k = channel * ringLength; k < (channel + 1) * ringLength; k++) ring[k] = state.rest[channel];
}

/** x ← x + B Δ for one channel. */
function advance(model: DenseModel, core: DenseCore, state: FilterState, channel: number): void {
  const { x, drive, last } = core;
  const change = state.rest[channel] - last[channel];
  const at = channel * model.order;
  for (let k = 0; k < x.length; k++) x[k] = x[k] + drive[at + k] * change;
}

function refresh(model: DenseModel, core: DenseCore, state: FilterState): void {
  const { x, seen, ring, ringLength, ringAt, lagged } = core;
  for (let k = 0; k < x.length; k++) {
    if (x[k] > STATE_LIMIT) x[k] = STATE_LIMIT;
    else if (x[k] < -STATE_LIMIT) x[k] = -STATE_LIMIT;
  }
  if (model.hasLevel === true) for (let c = 0; c < model.channelCount; c++) seen[x.length + c] = -state.rest[c];
  const L = model.lags.length;
  for (let k = 0; k < L; k++) {
    let slot = ringAt - model.lags[k];
    if (slot < 0) slot += ringLength;
    for (let i = 0; i < model.signalCount; i++) lagged[i * L + k] = ring[i * ringLength + slot] - state.rest[i];
  }
}

/**
 * z(t) + Σ_k B[h−1, k] (V x)_k and what the lags add, for every signal; step 1 by a read-out of its own, so that a tick
 * without a forecast costs ny rows instead of ny·r, and is the same number either way.
 *
 * shapes  out (ny × steps)
 * cost    O(ny · (d + lags)), and O(ny·r · d + ny · steps · r) beyond step 1; allocates nothing
 */
function paths(
  model: DenseModel,
  core: DenseCore,
  state: FilterState,
  steps: number,
  _plan: Float64Array | null,
  out: Float64Array,
): void {
  const { signalCount: ny, basisCount: r } = model;
  const { seen, firstStep, firstChange, coefficients } = core;
  multiply(firstStep, ny, seen.length, seen, 0, firstChange, 0);
  if (steps > 1) multiply(model.readout, ny * r, seen.length, seen, 0, coefficients, 0);
  for (let i = 0; i < ny; i++) {
    const at = i * steps;
    const now = state.rest[i];
    if (steps > 1) multiply(model.horizonBasis, steps, r, coefficients, i * r, out, at);
    out[at] = firstChange[i];
    for (let k = at; k < at + steps; k++) out[k] = now + out[k];
    addLagged(model, core, i, steps, out, at);
  }
}

function addLagged(
  { lags, lagged, signalCount }: DenseModel,
  core: DenseCore,
  signal: number,
  steps: number,
  out: Float64Array,
  at: number,
): void {
  const L = lags.length;
  if (L === 0) return;
  const S = lagged.length / (signalCount * L);
  for (let h = 0; h < S && h < steps; h++) {
    let sum = 0;
    const row = (signal * S + h) * L;
    for (let k = 0; k < L; k++) sum += lagged[row + k] * core.lagged[signal * L + k];
    out[at + h] = out[at + h] + sum;
  }
}

/** What the slowest pole still holds of the start, e⁻⁴, when it no longer shows. */
const FORGOTTEN = 0.018315638888734179;
const LONGEST_SETTLING = 1_000_000;

function settlingTicks(model: DenseModel): number {
  let slowest = 0;
  eachModulus(model, (modulus) => {
    slowest = Math.max(slowest, modulus);
  });
  let ticks = 1;
  for (let left = slowest; left > FORGOTTEN && ticks < LONGEST_SETTLING; ticks++) left *= slowest;
  return Math.max(ticks, longestLag(model));
}

function eachModulus({ poles, pairCount, order }: DenseModel, visit: (modulus: number, k: number) => void): void {
  let k = 0;
  for (; k < 2 * pairCount; k += 2) visit(Math.sqrt(poles[k] * poles[k] + poles[k + 1] * poles[k + 1]), k);
  for (; k < order; k++) visit(Math.abs(poles[k]), k);
}

function check(model: DenseModel): void {
  const { order: d, pairCount, basisCount: r, signalCount: ny, channelCount: nc, horizon } = model;
  requireWhole(pairCount, 'pairCount', 0, Math.floor(d / 2));
  requireWhole(r, 'basisCount', 1, 4096);
  requireLength(model.poles, 'poles', d);
  requireEach(model.poles, 'poles', (value) => Math.abs(value) < 1, 'less than 1 in size');
  eachModulus(model, (modulus, k) => {
    requireField(modulus < 1, `poles[${k}]`, 'a modulus less than 1', modulus);
  });
  requireLength(model.drive, 'drive', d * nc);
  requireLength(model.readout, 'readout', ny * r * seenCount(model));
  requireLength(model.horizonBasis, 'horizonBasis', horizon * r);
  checkLags(model);
  for (const name of ['drive', 'readout', 'horizonBasis', 'lagged'] as const) requireWeights(model[name], name);
}

function checkLags({ lags, lagged, signalCount, horizon }: DenseModel): void {
  for (let k = 0; k < lags.length; k++) {
    const least = k === 0 ? 1 : lags[k - 1] + 1;
    requireField(lags[k] >= least && lags[k] <= 1e6, `lags[${k}]`, `ascending, ${least} to 1000000`, lags[k]);
  }
  const steps = lags.length === 0 ? 0 : lagged.length / (signalCount * lags.length);
  const isWhole = Number.isInteger(steps) && steps <= horizon && (lags.length === 0 ? lagged.length === 0 : steps >= 1);
  requireField(isWhole, 'lagged', 'a row for each signal and each of its first steps', `${lagged.length} numbers`);
}

/** Rings oldest first, so that equal states are equal bytes. */
function copyOut(model: DenseModel, core: DenseCore, channel: number, out: Float64Array, at: number): void {
  const { ring, ringLength, ringAt } = core;
  if (channel < 0) out.set(core.x, at);
  else if (channel < model.signalCount) {
    const from = channel * ringLength;
    out.set(ring.subarray(from + ringAt, from + ringLength), at);
    out.set(ring.subarray(from, from + ringAt), at + ringLength - ringAt);
  } else out.fill(0, at, at + ringLength);
}

function copyIn(model: DenseModel, core: DenseCore, channel: number, from: Float64Array, at: number): void {
  const { ring, ringLength } = core;
  core.ringAt = 0;
  if (channel < 0) core.x.set(from.subarray(at, at + model.order));
  else if (channel < model.signalCount) ring.set(from.subarray(at, at + ringLength), channel * ringLength);
}

/** The kernel of the dense kind. */
export const denseKernel: Kernel<DenseModel, DenseCore> = {
  check,
  fingerprint: (model) => [Float64Array.of(model.pairCount), model.poles, model.drive, Float64Array.from(model.lags)],
  settlingTicks,
  createCore,
  memoryLayout: (model) => ({ perChannel: longestLag(model), shared: model.order }),
  copyOut,
  copyIn,
  beforeTick,
  settle,
  advance,
  refresh,
  paths,
};
