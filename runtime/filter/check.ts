/**
 * What a model must be before anything is computed with it: shapes that agree, finite numbers, a memory that forgets.
 * Checked once, at the door, so that the kernels need no checks. What a kind adds, its kernel checks.
 */

import { CROSSING_KNOTS, MAX_SNAPSHOT_BYTES } from '@stillwell/protocol';
import { checkAgreement } from './agreement.ts';
import { kernelOf } from './kernels.ts';
import type { CommonModel, Model } from './model.ts';
import { checkStuckGuard } from './repeats.ts';
import { requireEach, requireField, requireLength, requireWeights, requireWhole, WEIGHT_LIMIT } from './requirement.ts';
import { checkResponse } from './response.ts';
import { checkRound } from './round.ts';
import { stateSize } from './snapshot.ts';

/** Largest size of a mean, a clip or a lattice offset, in units of the signal. */
const UNIT_LIMIT = 1e15;

/**
 * Refuses a model whose parts disagree or that could leave the finite numbers.
 *
 * shapes  as Model states
 * throws  FilterError 'model', naming the part, what was expected and what was found
 */
export function checkModel(model: Model): void {
  checkCounts(model);
  kernelOf(model).check(model);
  checkShapes(model);
  checkChannels(model);
  if (model.agreement !== undefined) checkAgreement(model, model.agreement);
  if (model.stuck !== undefined) checkStuckGuard(model, model.stuck);
  if (model.response !== undefined) checkResponse(model, model.response);
  if (model.round !== undefined) checkRound(model, model.round);
  checkMemory(model);
  requireWeights(model.seasonal, 'seasonal');
  requireEach(model.radius, 'radius', (value) => value >= 0 && value <= WEIGHT_LIMIT, 'a finite number, zero or more');
  requireField(model.coverage > 0 && model.coverage < 1, 'coverage', 'more than 0 and less than 1', model.coverage);
  requireField(model.boundsRate >= 0 && model.boundsRate <= 0.5, 'boundsRate', '0 to 0.5', model.boundsRate);
  const { boundsLongRate: longRate = 0 } = model;
  requireField(longRate >= 0 && longRate <= 100, 'boundsLongRate', '0 to 100', longRate);
  checkCrossingMap(model.crossingMap);
  if (model.crossingMaps !== undefined) {
    requireLength(model.crossingMaps, 'crossingMaps', model.signalCount);
    for (const own of model.crossingMaps) checkCrossingMap(own?.map);
  }
  const { crossingFresh: fresh = 1 } = model;
  requireField(fresh > 0 && fresh <= 1, 'crossingFresh', 'more than 0 and at most 1', fresh);
  requireField(
    model.rejectSd > 0 && model.rejectSd <= WEIGHT_LIMIT,
    'rejectSd',
    'a finite number above 0',
    model.rejectSd,
  );
}

/** What is remembered must fit into a segment: lags and rounds of many channels do not. */
function checkMemory(model: Model): void {
  const bytes = stateSize(model);
  const most = MAX_SNAPSHOT_BYTES;
  requireField(bytes <= most, 'memory (lags, round)', `a snapshot of at most ${most} bytes`, `${bytes} bytes`);
}

function checkCrossingMap(map: Float64Array | undefined): void {
  if (map === undefined) return;
  requireLength(map, 'crossingMap', CROSSING_KNOTS.length);
  const isRising = (value: number, k: number): boolean => value >= (k > 0 ? map[k - 1] : 0) && value <= 1;
  requireField(map.every(isRising), 'crossingMap', 'rising from 0 to 1', Array.from(map).join(' '));
}

function checkCounts(model: CommonModel): void {
  const whole = (name: keyof CommonModel, low: number, high: number): void =>
    requireWhole(model[name] as number, name, low, high);
  whole('signalCount', 1, 4096);
  whole('channelCount', model.signalCount, 4096);
  whole('order', 1, 4096);
  whole('horizon', 1, 10_000);
  whole('seasonalPeriod', 0, 1e9);
  whole('seasonalBins', 1, 1e6);
  whole('rejectMaxTicks', 0, 10_000);
  whole('warmupTicks', 0, 1e9);
  requireField(model.tickMs > 0 && Number.isFinite(model.tickMs), 'tickMs', 'a finite number above 0', model.tickMs);
}

function checkShapes(model: CommonModel): void {
  for (const name of [
    'mean',
    'scale',
    'latticeStep',
    'latticeOffset',
    'clipLow',
    'clipHigh',
    'residualScale',
  ] as const) {
    requireLength(model[name], name, model.channelCount);
  }
  requireLength(model.seasonal, 'seasonal', model.signalCount * model.seasonalBins);
  requireLength(model.radius, 'radius', model.signalCount * model.horizon);
}

function checkChannels(model: CommonModel): void {
  for (const name of ['mean', 'latticeOffset', 'clipLow', 'clipHigh'] as const) {
    requireEach(
      model[name],
      name,
      (value) => Math.abs(value) <= UNIT_LIMIT,
      `a finite number, at most ${UNIT_LIMIT} in size`,
    );
  }
  for (const name of ['scale', 'latticeStep', 'residualScale'] as const) {
    requireEach(model[name], name, (value) => value >= 1e-30 && value <= UNIT_LIMIT, `1e-30 to ${UNIT_LIMIT}`);
  }
  for (let c = 0; c < model.channelCount; c++) {
    const high = model.clipHigh[c];
    requireField(model.clipLow[c] < high, `clipHigh[${c}]`, `more than clipLow, ${model.clipLow[c]}`, high);
  }
}
