/**
 * A segment back to readings: the gateway's filter is run again, tick by tick, from the same bundle and the same starting
 * state, so that its one-step forecasts come out the same to the last bit and the coded surprise gives the lattice numbers.
 * The checksum of the state it ends in proves that gateway and desk computed the same; a difference is never passed over.
 */
import { type Correction, latticeValue, type SegmentHead, SegmentReader } from '@stillwell/protocol';
import {
  createState,
  type FilterState,
  type Model,
  predictNext,
  restoreState,
  saveState,
  update,
} from '@stillwell/runtime/filter';
import { TrainError } from '../errors.ts';

/**
 * shapes  lattice (ticks × nc) row-major, NaN missing; residual arrays (nc)
 * units   lattice indices; residual sums in the bundle's expected spread of the one-step residual
 */
export interface Replay {
  readonly head: SegmentHead;
  readonly lattice: Float64Array;
  readonly corrections: readonly Correction[];
  readonly endState: Uint8Array;
  readonly readings: number;
  readonly residualCount: Float64Array;
  readonly residualSum: Float64Array;
  readonly residualSquareSum: Float64Array;
}

/**
 * Expected size of the one-step residual in lattice steps: what writer and reader of a segment both start from.
 *
 * shapes  (nc)
 */
export function residualScaleSteps(model: Model): Float64Array {
  const steps = new Float64Array(model.channelCount);
  for (let c = 0; c < steps.length; c++) steps[c] = (model.residualScale[c]! * model.scale[c]!) / model.latticeStep[c]!;
  return steps;
}

/**
 * Decodes one segment.
 *
 * startState  end state of the segment before it; ignored by a keyed segment, which carries its own
 * throws      ProtocolError 'segment' when start or end state are not the ones the gateway named, or the coded part is
 *             damaged; TrainError 'archive' when the bundle has other channels, or the start state is missing
 */
export function replaySegment(bytes: Uint8Array, model: Model, startState: Uint8Array | null): Replay {
  const reader = new SegmentReader(bytes, residualScaleSteps(model));
  const { head } = reader;
  checkShape(head, model);
  const state = startOf(reader, model, startState);
  const run = runThrough(reader, model, state);
  const endState = saveState(model, state);
  reader.checkState('end', endState);
  return { head, endState, corrections: reader.corrections, ...run };
}

function checkShape(head: SegmentHead, model: Model): void {
  if (head.channelCount === model.channelCount && head.signalCount === model.signalCount) return;
  throw new TrainError(
    'archive',
    `segment ${head.number} of ${head.gateway}: expected ${model.signalCount} signals of ${model.channelCount} channels ` +
      `as its bundle has, got ${head.signalCount} of ${head.channelCount}`,
  );
}

function startOf(reader: SegmentReader, model: Model, before: Uint8Array | null): FilterState {
  const bytes = reader.head.startState ?? before;
  if (bytes === null) {
    const { number, gateway } = reader.head;
    throw new TrainError('archive', `segment ${number} of ${gateway}: needs the end state of the one before it`);
  }
  reader.checkState('start', bytes);
  return bytes.length === 0 ? createState(model) : restoreState(model, bytes);
}

function runThrough(reader: SegmentReader, model: Model, state: FilterState) {
  const nc = model.channelCount;
  const lattice = new Float64Array(reader.head.ticks * nc);
  const predicted = new Float64Array(nc);
  const row = new Float64Array(nc);
  const started = new Uint8Array(nc);
  const sums = {
    residualCount: new Float64Array(nc),
    residualSum: new Float64Array(nc),
    residualSquareSum: new Float64Array(nc),
  };
  let readings = 0;
  for (let i = 0; i < reader.head.ticks; i++) {
    predictSteps(model, state, predicted);
    if (!reader.next(predicted, row)) break;
    lattice.set(row, i * nc);
    for (let c = 0; c < nc; c++) {
      if (!Number.isNaN(row[c])) readings++;
      row[c] = latticeValue(row[c]!, model.latticeStep[c]!, model.latticeOffset[c]!);
    }
    started.set(state.started);
    update(model, state, reader.head.firstTick + i, row);
    addResiduals(model, state, started, sums);
  }
  return { lattice, readings, ...sums };
}

/** One-step forecast in lattice steps, as the gateway computes it; NaN before the first tick. */
function predictSteps(model: Model, state: FilterState, out: Float64Array): void {
  predictNext(model, state, out);
  for (let c = 0; c < out.length; c++) out[c] = (out[c]! - model.latticeOffset[c]!) / model.latticeStep[c]!;
}

/** The first reading of a channel stands against the filter's start, not against a forecast: it says nothing of the model. */
function addResiduals(
  model: Model,
  state: FilterState,
  started: Uint8Array,
  sums: { residualCount: Float64Array; residualSum: Float64Array; residualSquareSum: Float64Array },
): void {
  for (let c = 0; c < model.channelCount; c++) {
    const share = state.innovation[c]! / model.residualScale[c]!;
    if (started[c] === 0 || !Number.isFinite(share)) continue;
    sums.residualCount[c]! += 1;
    sums.residualSum[c]! += share;
    sums.residualSquareSum[c]! += share * share;
  }
}
