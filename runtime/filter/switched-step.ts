/**
 * What the switched section remembers, and how one tick moves it: which mode the plant is in, the disturbance of each
 * driven signal, how far each near-discrete signal lies from what its mode says.
 */
import { multiply } from './dense.ts';
import { believe } from './switched-belief.ts';
import { discreteValue, goOn } from './switched-plant.ts';
import type { SwitchedSection } from './switched-section.ts';

/** Largest size of a scaled feature; they have a standard deviation near one in training, and floods reach far beyond. */
export const SWITCHED_FEATURE_LIMIT = 200;
/** Size beyond which a feature counts once more, with a weight of its own: floods answer to other rates than dry days. */
export const SWITCHED_BEND = 1.5;
/** Which mean of a disturbance, counted from 0, tells a flood: the third, of about ten ticks; or the last there is. */
export const FLOOD_MEAN = 2;
/** What a disturbance is beyond anything learned, nothing learned can foresee: this share of it is carried on. */
const FLOOD_SHARE = 0.8;
/** Least scale of the doubt. */
export const LEAST_DOUBT = 0.25;
/** Largest scale of the doubt. */
export const MOST_DOUBT = 12;
/** A mode believed in with this weight counts as known. */
const KNOWN = 0.9;

/**
 * Buffers of one state.
 *
 * shapes  as SwitchedSection
 * units   standardised
 */
export interface SwitchedCore {
  /** In one array, since a snapshot holds it: means (n·K), input means (v·K), habits (M·k), belief (M), mode, dwell. */
  readonly memory: Float64Array;
  readonly meansAt: number;
  readonly inputMeansAt: number;
  readonly habitAt: number;
  readonly beliefAt: number;
  /** Places in `memory` of the most believed mode and of the ticks it has lasted. */
  readonly modeAt: number;
  readonly dwellAt: number;
  /** (n) driven values of the tick before, and whether they were read. */
  readonly previous: Float64Array;
  readonly wasRead: Uint8Array;
  /** (2·F), (n·r), and (n) scale of the doubt now */
  readonly features: Float64Array;
  readonly coefficients: Float64Array;
  readonly doubt: Float64Array;
  /** (n) part of each disturbance beyond anything learned that is carried on. */
  readonly flood: Float64Array;
  /** (n) forecast of the disturbance's next step, season included. */
  readonly next: Float64Array;
  /** (n), (M), (M): scratch. */
  readonly along: Float64Array;
  readonly prior: Float64Array;
  readonly evidence: Float64Array;
}

/**
 * Buffers with every memory at rest: no disturbance, all modes alike.
 *
 * shapes  as SwitchedCore; allocates all that the section will ever need but for its paths
 */
export function createSwitchedCore(section: SwitchedSection): SwitchedCore {
  const { modeCount: M, discrete, driven, inputs, decays } = section;
  const meansAt = 0;
  const inputMeansAt = driven.length * decays.length;
  const habitAt = inputMeansAt + inputs.length * decays.length;
  const beliefAt = habitAt + M * discrete.length;
  const memory = new Float64Array(beliefAt + M + 2);
  memory.fill(1 / M, beliefAt, beliefAt + M);
  return {
    memory,
    meansAt,
    inputMeansAt,
    habitAt,
    beliefAt,
    modeAt: beliefAt + M,
    dwellAt: beliefAt + M + 1,
    previous: new Float64Array(driven.length),
    wasRead: new Uint8Array(driven.length),
    features: new Float64Array(2 * section.featureScale.length),
    coefficients: new Float64Array(section.outlook.length / (2 * section.featureScale.length)),
    doubt: new Float64Array(driven.length).fill(1),
    flood: new Float64Array(driven.length),
    next: new Float64Array(driven.length),
    along: new Float64Array(driven.length),
    prior: new Float64Array(M),
    evidence: new Float64Array(M),
  };
}

/**
 * Season of a driven signal's disturbance at a tick: straight lines between the middles of the bins.
 *
 * throws  nothing
 * cost    O(1); allocates nothing
 */
export function seasonAt(section: SwitchedSection, i: number, tick: number): number {
  const { seasonTicks: period, seasonBins: bins, season } = section;
  if (period === 0) return 0;
  const at = ((tick % period) * bins) / period - 0.5;
  const floor = Math.floor(at);
  const left = floor < 0 ? bins - 1 : floor;
  const right = left + 1 === bins ? 0 : left + 1;
  const base = season[i * bins + left];
  return base + (at - floor) * (season[i * bins + right] - base);
}

/**
 * Moves the memories on by one tick whose values are final.
 *
 * shapes  value (nc), isRead (nc): 1 where a reading was folded in, else another number; core.previous and core.wasRead of the tick before
 * units   standardised; tick is the number of the tick just folded in
 * cost    O(M² n + M n² + F); allocates nothing
 */
export function stepSwitched(
  section: SwitchedSection,
  core: SwitchedCore,
  tick: number,
  value: Float64Array,
  isRead: Uint8Array,
): void {
  const modeBefore = core.memory[core.modeAt];
  believe(section, core, value, isRead);
  const mode = core.memory[core.modeAt];
  const isSteady = mode === modeBefore && core.memory[core.beliefAt + mode] >= KNOWN;
  if (isSteady || core.memory[core.beliefAt + mode] < KNOWN) feel(section, core, tick, value, isRead, mode, isSteady);
  if (isSteady) remember(section, core, value, isRead, mode);
  const { inputs, decays } = section;
  for (let v = 0; v < inputs.length; v++) {
    let m = core.inputMeansAt + v * decays.length;
    for (let k = 0; k < decays.length; k++, m++) {
      core.memory[m] = decays[k] * core.memory[m] + (1 - decays[k]) * value[inputs[v]];
    }
  }
}

/**
 * An input's means as if it always had been at its value of now; other channels have none.
 *
 * shapes  value (nc)
 * cost    O(K); allocates nothing
 */
export function settleInput(section: SwitchedSection, core: SwitchedCore, channel: number, value: Float64Array): void {
  const K = section.decays.length;
  for (let v = 0; v < section.inputs.length; v++) {
    if (section.inputs[v] !== channel) continue;
    const at = core.inputMeansAt + v * K;
    for (let k = 0; k < K; k++) core.memory[at + k] = value[channel];
  }
}

/** Disturbance of the tick, and its means: measured in a steady mode; its own forecast where it cannot be. */
function feel(
  section: SwitchedSection,
  core: SwitchedCore,
  tick: number,
  value: Float64Array,
  isRead: Uint8Array,
  mode: number,
  isSteady: boolean,
): void {
  const { driven, decays, disturbanceLimit } = section;
  const { memory, along, next } = core;
  goOn(section, mode, core.previous, 0, next, along);
  for (let i = 0; i < driven.length; i++) {
    // Held by a stop a signal does not show what pushes it: what was known before is kept.
    if (isHeld(section, i, value[driven[i]]) || isHeld(section, i, core.previous[i])) continue;
    const season = seasonAt(section, i, tick);
    let w = next[i] - season;
    if (isSteady && isRead[driven[i]] === 1 && core.wasRead[i] === 1) w += value[driven[i]] - along[i];
    const limit = disturbanceLimit[i];
    w = w > limit ? limit : Math.max(w, -limit);
    let m = core.meansAt + i * decays.length;
    for (let k = 0; k < decays.length; k++, m++) memory[m] = decays[k] * memory[m] + (1 - decays[k]) * w;
  }
}

/** Whether a driven signal stands at one of its stops. */
function isHeld({ stops, driven }: SwitchedSection, i: number, value: number): boolean {
  const n = driven.length;
  return value <= stops[i] + stops[2 * n + i] || value >= stops[n + i] - stops[2 * n + i];
}

/** Remembers how far the near-discrete readings lie from what the mode says. */
function remember(
  section: SwitchedSection,
  core: SwitchedCore,
  value: Float64Array,
  isRead: Uint8Array,
  mode: number,
): void {
  const { discrete, spread, habit } = section;
  const k = discrete.length;
  for (let s = 0; s < k; s++) {
    if (isRead[discrete[s]] !== 1) continue;
    const at = core.habitAt + mode * k + s;
    const limit = 4 * spread[s];
    const off = value[discrete[s]] - discreteValue(section, mode, s, value);
    const bounded = off > limit ? limit : Math.max(off, -limit);
    core.memory[at] += habit * (bounded - core.memory[at]);
  }
}

/**
 * Features, coefficients of the outlook, and the disturbance's next step, from the memories.
 *
 * shapes  value (nc) of the tick just folded in, whose number is `tick`
 * cost    O(n·r · F); allocates nothing
 */
export function deriveSwitched(section: SwitchedSection, core: SwitchedCore, tick: number, value: Float64Array): void {
  const { driven, inputs, decays, featureScale, outlookBasis, doubtScale } = section;
  const { memory, features, coefficients, next } = core;
  let f = 0;
  for (let k = 0; k < driven.length * decays.length; k++, f++) features[f] = memory[core.meansAt + k] * featureScale[f];
  for (let v = 0; v < inputs.length; v++) {
    features[f] = value[inputs[v]] * featureScale[f];
    f++;
    for (let k = 0; k < decays.length; k++, f++) {
      features[f] = memory[core.inputMeansAt + v * decays.length + k] * featureScale[f];
    }
  }
  const half = featureScale.length;
  for (f = 0; f < half; f++) {
    let value = features[f];
    if (value > SWITCHED_FEATURE_LIMIT) value = SWITCHED_FEATURE_LIMIT;
    else if (value < -SWITCHED_FEATURE_LIMIT) value = -SWITCHED_FEATURE_LIMIT;
    features[f] = value;
    features[half + f] =
      value > SWITCHED_BEND ? value - SWITCHED_BEND : value < -SWITCHED_BEND ? value + SWITCHED_BEND : 0;
  }
  multiply(section.outlook, coefficients.length, features.length, features, 0, coefficients, 0);
  const r = coefficients.length / driven.length;
  for (let i = 0; i < driven.length; i++) {
    multiply(outlookBasis, 1, r, coefficients, i * r, next, i);
    core.flood[i] = floodOf(section, memory, i);
    next[i] += core.flood[i] + seasonAt(section, i, tick + 1);
    let scale = doubtScale[i * (half + 1)];
    for (f = 0; f < half; f++)
      scale += doubtScale[i * (half + 1) + 1 + f] * (features[f] < 0 ? -features[f] : features[f]);
    core.doubt[i] = scale < LEAST_DOUBT ? LEAST_DOUBT : Math.min(scale, MOST_DOUBT);
  }
}

/** What of a signal's disturbance lies beyond anything learned, and stays. */
function floodOf({ decays, floodFrom }: SwitchedSection, memory: Float64Array, i: number): number {
  const K = decays.length;
  const mean = memory[i * K + (FLOOD_MEAN < K ? FLOOD_MEAN : K - 1)];
  const from = floodFrom[i];
  return FLOOD_SHARE * (mean > from ? mean - from : mean < -from ? mean + from : 0);
}
