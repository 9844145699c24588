/**
 * Which mode the plant is in. Where every near-discrete signal was read the nearest mode is the mode; else what the
 * switches' chances say, weighed by what was read: of the near-discrete signals, and of how the driven ones moved.
 */
import { discreteValue, goOn, switchChance } from './switched-plant.ts';
import type { SwitchedSection } from './switched-section.ts';
import type { SwitchedCore } from './switched-step.ts';

/** Least chance of a mode before evidence: no reading is ruled out. */
const LEAST_CHANCE = 1e-4;

/**
 * Moves the belief in each mode, the most believed mode and its dwell on by one tick.
 *
 * shapes  value (nc), isRead (nc): 1 where a reading was folded in
 * cost    O(M² n + M n² + M k n); allocates nothing
 */
export function believe(section: SwitchedSection, core: SwitchedCore, value: Float64Array, isRead: Uint8Array): void {
  const { modeCount: M } = section;
  const { memory, beliefAt, prior, evidence } = core;
  expectModes(section, core);
  const seen = weighDiscrete(section, core, value, isRead);
  if (seen < section.discrete.length) weighDriven(section, core, value, isRead);
  let total = 0;
  let best = 0;
  for (let m = 0; m < M; m++) {
    // With every near-discrete signal read the nearest mode is the mode: chances would only delay it.
    const chance = seen === section.discrete.length ? 1 : prior[m];
    prior[m] = chance * evidence[m];
    total += prior[m];
    if (prior[m] > prior[best]) best = m;
  }
  if (seen === section.discrete.length) {
    for (let m = 0; m < M; m++) memory[beliefAt + m] = m === best ? 1 : 0;
  } else {
    for (let m = 0; m < M; m++) memory[beliefAt + m] = total > 0 ? prior[m] / total : 1 / M;
  }
  const isSame = memory[core.modeAt] === best;
  memory[core.modeAt] = best;
  memory[core.dwellAt] = isSame ? Math.min(memory[core.dwellAt] + 1, section.dwellLimit) : 1;
}

/** prior: the belief carried over one tick by the switches' chances. */
function expectModes(section: SwitchedSection, core: SwitchedCore): void {
  const { modeCount: M, pairFrom, pairTo } = section;
  const { memory, beliefAt, prior } = core;
  prior.fill(0);
  for (let m = 0; m < M; m++) {
    const held = memory[beliefAt + m];
    let stays = held;
    goOn(section, m, core.previous, 0, core.next, core.along);
    for (let pair = 0; pair < pairFrom.length; pair++) {
      if (pairFrom[pair] !== m) continue;
      const goes = stays * switchChance(section, pair, core.along, memory[core.dwellAt]);
      prior[pairTo[pair]] += goes;
      stays -= goes;
    }
    prior[m] += stays;
  }
  for (let m = 0; m < M; m++) if (prior[m] < LEAST_CHANCE) prior[m] = LEAST_CHANCE;
}

/** evidence: 1 / (1 + d²)⁴ with d the distance of the near-discrete readings from the mode's values; how many were read. */
function weighDiscrete(section: SwitchedSection, core: SwitchedCore, value: Float64Array, isRead: Uint8Array): number {
  const { modeCount: M, discrete, spread } = section;
  const k = discrete.length;
  let seen = 0;
  for (let s = 0; s < k; s++) if (isRead[discrete[s]] === 1) seen++;
  for (let m = 0; m < M; m++) {
    let distance = 1;
    for (let s = 0; s < k; s++) {
      if (isRead[discrete[s]] !== 1) continue;
      const off =
        (value[discrete[s]] - discreteValue(section, m, s, value) - core.memory[core.habitAt + m * k + s]) / spread[s];
      distance += off * off;
    }
    core.evidence[m] = 1 / (distance * distance * distance * distance);
  }
  return seen;
}

/** Multiplies the evidence by 1 / (1 + d²)², d the distance of the driven readings from where the mode would bring them. */
function weighDriven(section: SwitchedSection, core: SwitchedCore, value: Float64Array, isRead: Uint8Array): void {
  const { modeCount: M, driven, disturbanceLimit } = section;
  for (let m = 0; m < M; m++) {
    goOn(section, m, core.previous, 0, core.next, core.along);
    let distance = 1;
    for (let i = 0; i < driven.length; i++) {
      if (isRead[driven[i]] !== 1 || core.wasRead[i] === 0) continue;
      const off = (3 * (value[driven[i]] - core.along[i])) / disturbanceLimit[i];
      distance += off * off;
    }
    core.evidence[m] /= distance * distance;
  }
}
