/**
 * Folds the readings of one tick into the state. A reading is clipped and standardised, held against its one-step
 * forecast, and taken, unless it lies absurdly far away; a missing one is replaced by that forecast (zero innovation),
 * which costs far less accuracy than holding the last value. Whatever the readings are, every number stays finite.
 */
import { advanceChannel, settleChannel } from './bank.ts';
import { FilterError } from './errors.ts';
import { predictStandardised } from './forecast.ts';
import type { LinearModel } from './model.ts';
import { type FilterState, FOLDED, fadeTicks, MISSING, PASSED_OVER, refresh } from './state.ts';

/**
 * Folds one tick into the state, in place. A NaN or infinite reading counts as missing.
 *
 * Guard: a reading of a signal further from its forecast than rejectSd × residualScale × √a, with a the ticks since a
 * reading was folded in (1 where none was missed), is passed over; √a, since the error of a random walk grows so. Each one
 * passed over is counted, each one near its forecast takes one off the count, and at rejectMaxTicks the guard stands open:
 * readings are folded in however far off, until they come near again. Were the count cleared by the first reading folded
 * in, a filter once thrown off its plant would pass over rejectMaxTicks of every rejectMaxTicks + 1 readings for ever.
 * Inputs are commands and setpoints, whose jumps are real: they are never passed over.
 *
 * shapes  readings (nc)
 * units   readings in units of the channels; state standardised
 * throws  FilterError 'shape' if readings has another length; 'tick' unless tick is the last one's successor (any whole
 *         number from 0 at the first)
 * cost    O(d · nc·F + ny·r · d); allocates nothing
 */
export function update(model: LinearModel, state: FilterState, tick: number, readings: Float64Array): void {
  checkTurn(model, state, tick, readings);
  predictStandardised(model, state, state.predicted);
  if (state.tick >= 0) pushRing(model, state);
  for (let c = 0; c < model.channelCount; c++) {
    // y − y is 0 for finite y alone.
    if (readings[c] - readings[c] !== 0) missed(model, state, c);
    else observe(model, state, c, readings);
  }
  state.tick = tick;
  refresh(model, state);
}

/** Puts the value of the tick before into every ring, over the oldest. */
function pushRing(model: LinearModel, state: FilterState): void {
  const length = state.bank.ringLength;
  if (length === 0) return;
  for (let c = 0; c < model.channelCount; c++) state.ring[c * length + state.ringAt] = state.value[c];
  state.ringAt = state.ringAt + 1 === length ? 0 : state.ringAt + 1;
}

function observe(model: LinearModel, state: FilterState, c: number, readings: Float64Array): void {
  const y = Math.min(model.clipHigh[c], Math.max(model.clipLow[c], readings[c]));
  const z = Math.min(state.high[c], Math.max(state.low[c], (y - model.mean[c]) / model.scale[c]));
  state.reading[c] = z;
  state.innovation[c] = z - state.predicted[c];
  const isFar = isFarOff(model, state, c);
  if (isFar && state.passed[c] < model.rejectMaxTicks) {
    state.passed[c]++;
    state.observed[c] = PASSED_OVER;
    replace(model, state, c);
    return;
  }
  state.observed[c] = FOLDED;
  state.age[c] = 0;
  if (!isFar && state.passed[c] > 0) state.passed[c]--;
  state.value[c] = z;
  if (state.started[c] === 1) {
    advanceChannel(model, state.bank, state.memory, state.value, c);
  } else {
    state.started[c] = 1;
    settleChannel(state.bank, state.memory, state.ring, state.value, c);
  }
}

function isFarOff(model: LinearModel, state: FilterState, c: number): boolean {
  if (c >= model.signalCount || state.started[c] === 0) return false;
  const limit = model.rejectSd * model.residualScale[c] * Math.sqrt(state.age[c] + 1);
  return Math.abs(state.innovation[c]) > limit;
}

function missed(model: LinearModel, state: FilterState, c: number): void {
  state.reading[c] = Number.NaN;
  state.innovation[c] = Number.NaN;
  state.observed[c] = MISSING;
  replace(model, state, c);
}

/** Folds the one-step forecast in, in the place of a reading. */
function replace(model: LinearModel, state: FilterState, c: number): void {
  if (state.age[c] < 2 * fadeTicks(model)) state.age[c]++;
  state.value[c] = state.predicted[c];
  advanceChannel(model, state.bank, state.memory, state.value, c);
}

function checkTurn(model: LinearModel, state: FilterState, tick: number, readings: Float64Array): void {
  if (readings.length !== model.channelCount) {
    throw new FilterError('shape', `readings: expected ${model.channelCount} channels, got ${readings.length}`, {
      details: { expected: model.channelCount, got: readings.length },
    });
  }
  if (Number.isSafeInteger(tick) && (state.tick < 0 ? tick >= 0 : tick === state.tick + 1)) return;
  const expected = state.tick < 0 ? 'a whole number from 0' : `${state.tick + 1}, the successor of the last`;
  throw new FilterError('tick', `tick: expected ${expected}, got ${tick}`, { details: { expected, got: tick } });
}
