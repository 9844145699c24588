/**
 * The round: what a signal did the same time a round ago (a week, a year of quarters), taken away before the kernel sees the
 * value and given back to its path. The kernel then forecasts only how this round differs from the last:
 *
 *   rest(t) = z(t) − w z(t − W),   path(t + h) = kernel's path(t + h) + w z(t + h − W),   h ≤ H ≤ W
 *
 * A pattern too long for the bank (days of a week that differ) costs W numbers of memory a signal, and none of the state.
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
 * shapes  (ny × (W + 1)): slot t mod (W + 1) holds the value folded in at tick t
 */
export function createRoundMemory(model: CommonModel): Float64Array {
  return new Float64Array(model.round === undefined ? 0 : model.signalCount * (model.round.ticks + 1));
}

/** A signal's past as if it always had been its first reading. */
export function settleRound(round: Round, memory: Float64Array, signal: number, value: number): void {
  const length = round.ticks + 1;
  memory.fill(value, signal * length, (signal + 1) * length);
}

/**
 * Takes in the values of a tick and works out what the kernel sees.
 *
 * shapes  state.value, state.rest (nc); only signals are touched
 * cost    O(1) a signal; allocates nothing
 */
export function advanceRound(round: Round, state: FilterState, signal: number, tick: number): void {
  const length = round.ticks + 1;
  state.roundMemory[signal * length + (tick % length)] = state.value[signal];
  state.rest[signal] = restOf(round, state, signal, tick);
}

/** z(t) − w z(t − W), from the memory. */
export function restOf(round: Round, state: FilterState, signal: number, tick: number): number {
  const length = round.ticks + 1;
  const weight = round.weight[signal];
  if (weight === 0) return state.value[signal];
  return state.value[signal] - weight * state.roundMemory[signal * length + ((tick + 1) % length)];
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
      paths[i * steps + h - 1] += weight * state.roundMemory[i * length + slot];
      slot = slot + 1 === length ? 0 : slot + 1;
    }
  }
}
