/**
 * Folds the readings of one tick into the state. A reading is clipped and standardised, held against its one-step
 * forecast, and taken, unless it lies absurdly far away; a missing one is replaced by that forecast (zero innovation),
 * which costs far less accuracy than holding the last value. Whatever the readings are, every number stays finite.
 */
import { watchAgreement } from './agreement.ts';
import { FilterError } from './errors.ts';
import { predictStandardised } from './forecast.ts';
import { kernelOf } from './kernels.ts';
import type { CommonModel, Model } from './model.ts';
import { countRepeats, standsStill } from './repeats.ts';
import { advanceRound, bridgeRound, isFirstRound } from './round.ts';
import { type FilterState, FOLDED, fadeTicks, MISSING, PASSED_OVER, STUCK } from './state.ts';

/**
 * Folds one tick into the state, in place. A NaN or infinite reading counts as missing.
 *
 * Guard: a reading of a signal further from its forecast than rejectSd × residualScale × √a, with a the ticks since a
 * reading was folded in (1 where none was missed), is passed over; √a, since the error of a random walk grows so. Each one
 * passed over is counted, each one near its forecast takes one off the count, and at rejectMaxTicks the guard stands open:
 * readings are folded in however far off, until they come near again. Were the count cleared by the first reading folded
 * in, a filter once thrown off its plant would pass over rejectMaxTicks of every rejectMaxTicks + 1 readings for ever.
 * A model may ask that a second far reading in the same place be taken for what it is, a jump, and folded in at once.
 * Inputs are commands and setpoints, whose jumps are real: they are never passed over. A signal that repeats itself as no
 * working sensor does counts as missing (repeats.ts).
 *
 * shapes  readings (nc)
 * units   readings in units of the channels; state standardised
 * throws  FilterError 'shape' if readings has another length; 'tick' unless tick is the last one's successor (any whole
 *         number from 0 at the first)
 * cost    that of the kind's kernel; allocates nothing
 */
export function update(model: Model, state: FilterState, tick: number, readings: Float64Array): void {
  checkTurn(model, state, tick, readings);
  predictStandardised(model, state, state.predicted);
  const kernel = kernelOf(model);
  if (state.tick >= 0) kernel.beforeTick(model, state.core, state);
  for (let c = 0; c < model.channelCount; c++) {
    // y − y is 0 for finite y alone.
    if (readings[c] - readings[c] !== 0) missed(model, state, c, tick, MISSING);
    else if (hangs(model, state, c, readings[c])) missed(model, state, c, tick, STUCK);
    else observe(model, state, c, tick, readings);
  }
  state.tick = tick;
  kernel.refresh(model, state.core, state);
  if (model.agreement !== undefined) watchAgreement(model, model.agreement, state);
}

/**
 * Folds a tick in as `update` does where every reading is there and taken, and leaves out all that nobody looks at: the
 * forecast it would be held against, and what the next one follows from. For warming a filter up on history; `catchUp` makes up
 * for it. The guard is not asked, predicted values and innovations stay as they were. False, with nothing moved, where the
 * tick needs `update`: a reading is or was missing, a sensor hangs, or the kind cannot.
 *
 * shapes  as `update`
 * units   as `update`
 * throws  as `update`
 * cost    that of moving the memories; allocates nothing
 */
export function foldUnseen(model: Model, state: FilterState, tick: number, readings: Float64Array): boolean {
  checkTurn(model, state, tick, readings);
  const kernel = kernelOf(model);
  if (kernel.isDerived !== true || state.tick < 0) return false;
  for (let c = 0; c < model.channelCount; c++) {
    if (readings[c] - readings[c] !== 0 || state.started[c] === 0 || state.age[c] > 0) return false;
    if (wouldHang(model, state, c, readings[c])) return false;
  }
  kernel.beforeTick(model, state.core, state);
  for (let c = 0; c < model.channelCount; c++) {
    if (model.stuck !== undefined && c < model.signalCount) countRepeats(state, c, readings[c]);
    const z = standardised(model, state, c, readings[c]);
    state.reading[c] = z;
    state.observed[c] = FOLDED;
    state.lean[c] = 0;
    if (state.passed[c] > 0) state.passed[c]--;
    state.value[c] = z;
    takeRound(model, state, c, tick, z);
    kernel.advance(model, state.core, state, c);
  }
  state.tick = tick;
  if (model.agreement !== undefined) watchAgreement(model, model.agreement, state);
  return true;
}

/**
 * Works out what `foldUnseen` left out, before the next `update` or forecast.
 *
 * cost    that of the kind's kernel; allocates nothing
 */
export function catchUp(model: Model, state: FilterState): void {
  if (state.tick >= 0) kernelOf(model).refresh(model, state.core, state);
}

/** Clipped and standardised. */
function standardised(model: CommonModel, state: FilterState, c: number, reading: number): number {
  const y = Math.min(model.clipHigh[c], Math.max(model.clipLow[c], reading));
  return Math.min(state.high[c], Math.max(state.low[c], (y - model.mean[c]) / model.scale[c]));
}

/** Whether a signal would hang with one more such reading. */
function wouldHang({ stuck, signalCount }: CommonModel, state: FilterState, c: number, reading: number): boolean {
  if (stuck?.acts !== true || c >= signalCount || stuck.ticks[c] === 0) return false;
  return reading === state.repeated[c] && state.repeats[c] + 1 >= stuck.ticks[c];
}

function observe(model: Model, state: FilterState, c: number, tick: number, readings: Float64Array): void {
  const z = standardised(model, state, c, readings[c]);
  state.reading[c] = z;
  state.innovation[c] = z - state.predicted[c];
  const limit = guardLimit(model, state, c);
  const isFar = Math.abs(state.innovation[c]) > limit && !isUnguarded(model, state, c, tick);
  if (isFar && state.passed[c] < model.rejectMaxTicks && !isConfirmed(model, state, c)) {
    state.passed[c]++;
    state.lean[c] = leanOf(model, state, c);
    state.observed[c] = PASSED_OVER;
    replace(model, state, c, tick, state.predicted[c] + Math.min(limit, Math.max(-limit, state.innovation[c])));
    return;
  }
  state.observed[c] = FOLDED;
  const missed = state.age[c];
  state.age[c] = 0;
  state.lean[c] = 0;
  if (!isFar && state.passed[c] > 0) state.passed[c]--;
  state.value[c] = z;
  const isFirst = state.started[c] === 0;
  state.started[c] = 1;
  if (missed > 0 && !isFirst && !isFar) bridgeGap(model, state, c, tick, missed);
  takeRound(model, state, c, tick, z);
  if (isFirst) kernelOf(model).settle(model, state.core, state, c);
  else kernelOf(model).advance(model, state.core, state, c);
}

/**
 * What stood in for missed readings was a forecast, and at the first reading after them it turns out by how much it was off.
 * As in a random walk tied at both ends, the error is taken to have grown by even steps, and the memories are moved as if
 * the values folded in had been so. Not after gaps so long that forecasts had begun to fade, nor by a reading that is itself
 * beyond the guard.
 */
function bridgeGap(model: Model, state: FilterState, c: number, tick: number, missed: number): void {
  const { bridge } = kernelOf(model);
  if (model.bridgesGaps !== true || bridge === undefined || c >= model.signalCount) return;
  if (missed > fadeTicks(model)) return;
  const step = state.innovation[c] / (missed + 1);
  bridge(model, state.core, c, missed, step);
  if (model.round !== undefined) bridgeRound(model.round, state, c, tick, missed, step);
}

function guardLimit(model: CommonModel, state: FilterState, c: number): number {
  return model.rejectSd * model.residualScale[c] * Math.sqrt(state.age[c] + 1);
}

/** How far off a reading lies, in 64ths of the guard's width, as far as 16 bits go. */
function leanOf(model: CommonModel, state: FilterState, c: number): number {
  const widths = (64 * state.innovation[c]) / (model.rejectSd * model.residualScale[c]);
  return Math.round(Math.min(32_767, Math.max(-32_767, widths)));
}

/** Whether a far reading lies where the one passed over before it lay, within half the guard's width: spikes do not repeat. */
function isConfirmed(model: CommonModel, state: FilterState, c: number): boolean {
  if (model.confirmsJumps !== true || state.lean[c] === 0) return false;
  return Math.abs(leanOf(model, state, c) - state.lean[c]) <= 32;
}

/** Inputs, first readings, and signals of whose round nothing is known yet. */
function isUnguarded(model: CommonModel, state: FilterState, c: number, tick: number): boolean {
  if (c >= model.signalCount || state.started[c] === 0) return true;
  return model.round !== undefined && isFirstRound(model.round, state, c, tick);
}

function hangs(model: CommonModel, state: FilterState, c: number, reading: number): boolean {
  const { stuck, signalCount } = model;
  if (stuck === undefined || c >= signalCount) return false;
  countRepeats(state, c, reading);
  return stuck.acts && standsStill(model, state, c);
}

function missed(model: Model, state: FilterState, c: number, tick: number, why: number): void {
  state.reading[c] = Number.NaN;
  state.innovation[c] = Number.NaN;
  state.observed[c] = why;
  replace(model, state, c, tick, state.predicted[c]);
}

/** Folds the one-step forecast in, in the place of a reading; `kept` is what a round remembers of the tick. */
function replace(model: Model, state: FilterState, c: number, tick: number, kept: number): void {
  if (state.age[c] < 2 * fadeTicks(model)) state.age[c]++;
  state.value[c] = state.predicted[c];
  takeRound(model, state, c, tick, kept);
  kernelOf(model).advance(model, state.core, state, c);
}

/** Works out what the kernel sees of a value, where that is not the value itself. */
function takeRound(model: Model, state: FilterState, c: number, tick: number, kept: number): void {
  const { round } = model;
  if (round === undefined) return;
  if (c < model.signalCount) advanceRound(round, state, c, tick, kept);
  else state.rest[c] = state.value[c];
}

function checkTurn(model: CommonModel, state: FilterState, tick: number, readings: Float64Array): void {
  if (readings.length !== model.channelCount) {
    throw new FilterError('shape', `readings: expected ${model.channelCount} channels, got ${readings.length}`, {
      details: { expected: model.channelCount, got: readings.length },
    });
  }
  if (Number.isSafeInteger(tick) && (state.tick < 0 ? tick >= 0 : tick === state.tick + 1)) return;
  const expected = state.tick < 0 ? 'a whole number from 0' : `${state.tick + 1}, the successor of the last`;
  throw new FilterError('tick', `tick: expected ${expected}, got ${tick}`, { details: { expected, got: tick } });
}
