/**
 * The linear kind: bank → features φ → state x = W φ → coefficients c = V x → path z(t) + B c. Where the model has an own
 * part, each signal's coefficients take in its own features and the inputs' directly, and the state carries what signals
 * say of each other.
 */
import { advanceChannel, type BankConstants, bankConstants, settleChannel, writeFeatures } from './bank.ts';
import { multiply } from './dense.ts';
import type { Core, Kernel } from './kernel.ts';
import type { BankModel, LinearModel } from './model.ts';
import { requireEach, requireField, requireLength, requireWeights, requireWhole, WEIGHT_LIMIT } from './requirement.ts';
import type { FilterState } from './state.ts';

/**
 * Buffers of the bank and of what follows from it.
 *
 * shapes  nc channels, F features a channel, d order, ny signals, r basis
 * units   standardised
 */
export interface LinearCore extends Core {
  readonly bank: BankConstants;
  /** (nc × memoryCount) */
  readonly memory: Float64Array;
  /** (nc × ringLength) */
  readonly ring: Float64Array;
  /** Slot of the ring that holds the oldest value. */
  ringAt: number;
  /** (memoryCount) for work inside one call. */
  readonly moved: Float64Array;
  /** (nc·F) */
  readonly features: Float64Array;
  /** (ny·r) */
  readonly coefficients: Float64Array;
  /** (ny) of (r × (1 + nu)·F): each signal's rows of the own part; none without one. */
  readonly ownRows: readonly Float64Array[];
  /** ((1 + nu)·F) features of one signal and of the inputs. */
  readonly ownPast: Float64Array;
  /** (r) */
  readonly ownPart: Float64Array;
}

/** Buffers before the first tick. */
export function createLinearCore(model: BankModel): LinearCore {
  const nc = model.channelCount;
  const bank = bankConstants(model);
  const { own, signalCount: ny, basisCount: r } = model;
  const width = (1 + nc - ny) * model.featureCount;
  const ownRows: Float64Array[] = [];
  if (own !== undefined) for (let i = 0; i < ny; i++) ownRows.push(own.subarray(i * r * width, (i + 1) * r * width));
  return {
    bank,
    memory: new Float64Array(nc * bank.memoryCount),
    ring: new Float64Array(nc * bank.ringLength),
    ringAt: 0,
    moved: new Float64Array(bank.memoryCount),
    features: new Float64Array(nc * model.featureCount),
    x: new Float64Array(model.order),
    coefficients: new Float64Array(ny * r),
    ownRows,
    ownPast: new Float64Array(own === undefined ? 0 : width),
    ownPart: new Float64Array(own === undefined ? 0 : r),
  };
}

/**
 * Moves memories and ring as `Kernel.bridge` states: the bank run over the steps alone, since it is linear in its values.
 *
 * cost    O(missed · memoryCount); once a gap; allocates nothing
 */
function bridgeMemories(model: BankModel, core: LinearCore, channel: number, missed: number, step: number): void {
  const { bank, memory, ring, ringAt, moved } = core;
  moved.fill(0);
  for (let k = 1; k <= missed; k++) {
    const by = k * step;
    for (let m = 0; m < bank.decayCount; m++) moved[m] = model.decays[m] * moved[m] + bank.decayGain[m] * by;
    for (let r = 0, m = bank.decayCount; r < bank.resonatorCount; r++, m += 2) {
      const re = moved[m];
      const im = moved[m + 1];
      moved[m] = model.resonatorRe[r] * re - model.resonatorIm[r] * im + bank.resonatorGain[r] * by;
      moved[m + 1] = model.resonatorRe[r] * im + model.resonatorIm[r] * re;
    }
  }
  const at = channel * bank.memoryCount;
  for (let m = 0; m < bank.memoryCount; m++) memory[at + m] += moved[m];
  // The newest slot lies before the oldest: it holds the value of the tick before, the last one missed.
  for (let k = missed, slot = ringAt; k > missed - bank.ringLength && k >= 1; k--) {
    slot = slot === 0 ? bank.ringLength - 1 : slot - 1;
    ring[channel * bank.ringLength + slot] += k * step;
  }
}

/** Puts the value of the tick before into every ring, over the oldest. */
function pushRing(model: BankModel, core: LinearCore, state: FilterState): void {
  const length = core.bank.ringLength;
  if (length === 0) return;
  for (let c = 0; c < model.channelCount; c++) core.ring[c * length + core.ringAt] = state.rest[c];
  core.ringAt = core.ringAt + 1 === length ? 0 : core.ringAt + 1;
}

/**
 * Works out features, predictive state and forecast coefficients from the memories.
 *
 * shapes  features (nc·F), x (d), coefficients (ny·r)
 * cost    O(d · nc·F + ny·r · d), and O(ny·r · (1 + nu)·F) for an own part; allocates nothing
 */
function refreshLinear(model: BankModel, core: LinearCore, state: FilterState): void {
  const { bank, memory, ring, ringAt, features } = core;
  for (let c = 0; c < model.channelCount; c++) {
    writeFeatures(model, bank, memory, ring, ringAt, state.rest, c, features);
  }
  multiply(model.bottleneck, model.order, features.length, features, 0, core.x, 0);
  multiply(model.readout, core.coefficients.length, model.order, core.x, 0, core.coefficients, 0);
  if (core.ownRows.length > 0) addOwnPart(model, core);
}

/** Adds each signal's own part to its coefficients. */
function addOwnPart(model: BankModel, core: LinearCore): void {
  const { ownRows, ownPast, ownPart, features, coefficients } = core;
  const F = model.featureCount;
  const inputsAt = model.signalCount * F;
  for (let f = F; f < ownPast.length; f++) ownPast[f] = features[inputsAt + f - F];
  for (let i = 0; i < ownRows.length; i++) {
    for (let f = 0; f < F; f++) ownPast[f] = features[i * F + f];
    multiply(ownRows[i], ownPart.length, ownPast.length, ownPast, 0, ownPart, 0);
    const at = i * ownPart.length;
    for (let k = 0; k < ownPart.length; k++) coefficients[at + k] += ownPart[k];
  }
}

/**
 * z(t) + Σ_k B[h−1, k] coefficient k, for every signal.
 *
 * shapes  out (ny × steps)
 * cost    O(ny · steps · r); allocates nothing
 */
function linearPaths(
  model: BankModel,
  core: LinearCore,
  state: FilterState,
  steps: number,
  _plan: Float64Array | null,
  out: Float64Array,
): void {
  const r = model.basisCount;
  for (let i = 0; i < model.signalCount; i++) {
    const at = i * steps;
    multiply(model.horizonBasis, steps, r, core.coefficients, i * r, out, at);
    const now = state.rest[i];
    for (let h = 0; h < steps; h++) out[at + h] = now + out[at + h];
  }
}

/** What the slowest memory still holds of the start, e⁻⁴, when it no longer shows. */
const FORGOTTEN = 0.018315638888734179;
const LONGEST_SETTLING = 1_000_000;

/** Ticks in which the slowest memory forgets, or the longest lag. */
function settlingTicks(model: BankModel): number {
  let slowest = 0;
  for (const decay of model.decays) slowest = Math.max(slowest, decay);
  for (let k = 0; k < model.resonatorRe.length; k++) {
    const re = model.resonatorRe[k];
    const im = model.resonatorIm[k];
    slowest = Math.max(slowest, Math.sqrt(re * re + im * im));
  }
  let ticks = 1;
  for (let left = slowest; left > FORGOTTEN && ticks < LONGEST_SETTLING; ticks++) left *= slowest;
  return Math.max(ticks, ...model.lags);
}

function copyOut(_model: BankModel, core: LinearCore, channel: number, out: Float64Array, at: number): void {
  if (channel < 0) return;
  const { memory, ring, ringAt, bank } = core;
  out.set(memory.subarray(channel * bank.memoryCount, (channel + 1) * bank.memoryCount), at);
  const from = channel * bank.ringLength;
  const ringOut = at + bank.memoryCount;
  out.set(ring.subarray(from + ringAt, from + bank.ringLength), ringOut);
  out.set(ring.subarray(from, from + ringAt), ringOut + bank.ringLength - ringAt);
}

function copyIn(_model: BankModel, core: LinearCore, channel: number, from: Float64Array, at: number): void {
  if (channel < 0) return;
  const { memory, ring, bank } = core;
  core.ringAt = 0;
  memory.set(from.subarray(at, at + bank.memoryCount), channel * bank.memoryCount);
  const ringFrom = at + bank.memoryCount;
  ring.set(from.subarray(ringFrom, ringFrom + bank.ringLength), channel * bank.ringLength);
}

/**
 * Refuses a bank, or tensors around it, that cannot be computed with.
 *
 * throws  FilterError 'model'
 */
function checkBankModel(model: BankModel): void {
  const { decays, resonatorRe, resonatorIm, lags, featureCount, order, basisCount, horizon } = model;
  const nc = model.channelCount;
  requireWhole(basisCount, 'basisCount', 1, 4096);
  requireLength(resonatorIm, 'resonatorIm', resonatorRe.length);
  const levels = model.level === true ? 1 : 0;
  const features = decays.length + resonatorRe.length + resonatorIm.length + levels + lags.length;
  requireField(
    features === featureCount && features > 0,
    'featureCount',
    `decays + 2 × resonators + level + lags = ${features}, above 0`,
    featureCount,
  );
  requireLength(model.featureScale, 'featureScale', nc * featureCount);
  requireLength(model.bottleneck, 'bottleneck', order * nc * featureCount);
  requireLength(model.readout, 'readout', model.signalCount * basisCount * order);
  requireLength(model.horizonBasis, 'horizonBasis', horizon * basisCount);
  requireEach(decays, 'decays', (value) => value > 0 && value < 1, 'more than 0 and less than 1');
  for (let k = 0; k < resonatorRe.length; k++) {
    const modulus = Math.sqrt(resonatorRe[k] * resonatorRe[k] + resonatorIm[k] * resonatorIm[k]);
    requireField(modulus < 1, `resonators[${k}]`, 'a modulus less than 1', modulus);
  }
  for (let k = 0; k < lags.length; k++) {
    const least = k === 0 ? 1 : lags[k - 1] + 1;
    requireField(lags[k] >= least && lags[k] <= 1e6, `lags[${k}]`, `ascending, ${least} to 1000000`, lags[k]);
  }
  requireEach(
    model.featureScale,
    'featureScale',
    (value) => value > 0 && value <= WEIGHT_LIMIT,
    'a finite number above 0',
  );
  for (const name of ['bottleneck', 'readout', 'horizonBasis'] as const) requireWeights(model[name], name);
  if (model.own === undefined) return;
  requireLength(model.own, 'own', model.signalCount * basisCount * (1 + nc - model.signalCount) * featureCount);
  requireWeights(model.own, 'own');
}

/** The kernel of the linear kind; kinds that build on the bank take it up piece by piece. */
export const linearKernel: Kernel<LinearModel, LinearCore> = {
  check: checkBankModel,
  fingerprint: (model) => [model.decays, model.resonatorRe, model.resonatorIm, Float64Array.from(model.lags)],
  settlingTicks,
  createCore: createLinearCore,
  memoryLayout: (model) => {
    const { memoryCount, ringLength } = bankConstants(model);
    return { perChannel: memoryCount + ringLength, shared: 0 };
  },
  copyOut,
  copyIn,
  beforeTick: pushRing,
  settle: (_model, core, state, channel) => settleChannel(core.bank, core.memory, core.ring, state.rest, channel),
  advance: (model, core, state, channel) => advanceChannel(model, core.bank, core.memory, state.rest, channel),
  bridge: bridgeMemories,
  isDerived: true,
  refresh: refreshLinear,
  own: { count: (model) => model.featureCount, features: (core) => core.features },
  paths: linearPaths,
};
