/**
 * The round: what a signal did the same time a round ago (a week, a year of quarters), taken away before the kernel sees the
 * value and given back to its path. The kernel then forecasts only how this round differs from the last:
 *
 *   rest(t) = z(t) − w z(t − W),   path(t + h) = kernel's path(t + h) + w z(t + h − W),   h ≤ H ≤ W
 *
 * A pattern too long for the bank (days of a week that differ) costs W numbers of memory a signal, and none of the state.
 * What is not yet known of a round, in a signal's first one, counts as its value now: the last value is then the forecast,
 * and no reading is passed over. A reading that is passed over later is remembered cut to the guard's limit, not as the
 * forecast that replaced it: a forecast remembered for a round would be held against the readings of the next, and so on
 * for ever.
 * source  seasonal differencing: Box, Jenkins, Reinsel & Ljung, Time Series Analysis, 5th ed. (2015), section 9.1, where w = 1
 */
import { MAX_ROUND_TICKS } from '@stillwell/protocol';
import type { CommonModel } from './model.ts';
import { requireField, requireLength, requireWhole } from './requirement.ts';
import type { FilterState } from './state.ts';

/** As it stands in a model. */
export interface Round {
  /** W, ticks; at least the horizon. */
  readonly ticks: number;
  /** (ny) w, 0 to 1; 0: the signal has no round. */
  readonly weight: Float64Array;
}

/**
 * Refuses a round that cannot be computed with.
 *
 * throws  FilterError 'model'
 */
export function checkRound(model: CommonModel, round: Round): void {
  requireWhole(round.ticks, 'round.ticks', model.horizon, MAX_ROUND_TICKS);
  requireLength(round.weight, 'round.weight', model.signalCount);
  for (let i = 0; i < round.weight.length; i++) {
    const weight = round.weight[i];
    requireField(weight >= 0 && weight <= 1, `round.weight[${i}]`, '0 to 1', weight);
  }
}

/**
 * Memory of the rounds.
 *
 * shapes  (ny × (W + 1)): slot t mod (W + 1) holds the value of tick t; NaN: not known
 */
export function createRoundMemory(model: CommonModel): Float64Array {
  return new Float64Array(model.round === undefined ? 0 : model.signalCount * (model.round.ticks + 1)).fill(Number.NaN);
}

/** Whether a signal's value of a round before a tick is not known though it should be taken away. */
export function isFirstRound(round: Round, state: FilterState, signal: number, tick: number): boolean {
  if (signal >= round.weight.length || round.weight[signal] === 0) return false;
  const length = round.ticks + 1;
  const before = state.roundMemory[signal * length + ((tick + 1) % length)];
  return before - before !== 0;
}

/**
 * Takes in the value of a tick and works out what the kernel sees. Before a signal's first reading nothing is remembered.
 *
 * shapes  state.value, state.rest (nc); only signals are touched; `kept` is what is remembered of the tick
 * cost    O(1); allocates nothing
 */
export function advanceRound(round: Round, state: FilterState, signal: number, tick: number, kept: number): void {
  const length = round.ticks + 1;
  state.roundMemory[signal * length + (tick % length)] = state.started[signal] === 0 ? Number.NaN : kept;
  state.rest[signal] = restOf(round, state, signal, tick);
}

/**
 * Moves what is remembered of the last `missed` ticks before `tick` by even steps, as the kernel's memories are.
 *
 * cost    O(missed); allocates nothing
 */
export function bridgeRound(
  round: Round,
  state: FilterState,
  signal: number,
  tick: number,
  missed: number,
  step: number,
): void {
  const length = round.ticks + 1;
  for (let k = 1; k <= Math.min(missed, round.ticks); k++) {
    const back = tick - (missed + 1 - k);
    if (back >= 0) state.roundMemory[signal * length + (back % length)] += k * step;
  }
}

/** z(t) − w z(t − W), from the memory. */
export function restOf(round: Round, state: FilterState, signal: number, tick: number): number {
  const length = round.ticks + 1;
  const value = state.value[signal];
  const weight = round.weight[signal];
  if (weight === 0) return value;
  const before = state.roundMemory[signal * length + ((tick + 1) % length)];
  return value - weight * (before - before === 0 ? before : value);
}

/**
 * Gives back to a path what was taken away.
 *
 * shapes  paths (ny × steps), steps ≤ W
 * units   standardised
 * cost    O(ny · steps); allocates nothing
 */
export function addRound(
  model: CommonModel,
  round: Round,
  state: FilterState,
  steps: number,
  paths: Float64Array,
): void {
  const length = round.ticks + 1;
  for (let i = 0; i < model.signalCount; i++) {
    const weight = round.weight[i];
    if (weight === 0) continue;
    let slot = (state.tick + 2) % length;
    for (let h = 1; h <= steps; h++) {
      // Tick t + h − W lies in slot (t + h + 1) mod (W + 1).
      const before = state.roundMemory[i * length + slot];
      paths[i * steps + h - 1] += weight * (before - before === 0 ? before : state.value[i]);
      slot = slot + 1 === length ? 0 : slot + 1;
    }
  }
}
