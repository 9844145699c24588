/**
 * Where a simulation begins when all that is known are the first readings, and how long until that no longer shows.
 */
import { createState, type DrivenCore, type DrivenModel, stepMembers } from '@stillwell/runtime/filter';
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';
import type { Member } from './ensemble.ts';
import { type DrivenRecord, stateRun } from './free-run.ts';

/** Of the mean diagonal. */
const PENALTY = 1e-3;
/** Two runs begun this far either side of the middle, standardised … */
const APART = 1;
/** … must have come this close. */
const FORGOTTEN = 0.02;
/** The record's inputs are run through this often: a short record may end before a slow plant has forgotten. */
const ROUNDS = 3;

/**
 * Hidden states by regression on signals, inputs and a one, over the record they were fitted on.
 *
 * shapes  result (members · hidden × (nc + 1))
 * units   standardised
 * throws  nothing
 * source  least squares
 * cost    a run a member
 */
export function hiddenStarts(members: readonly Member[], record: DrivenRecord): Float64Array {
  const rows = members.flatMap((member) => {
    const states = stateRun(member.shape, member.features, member.parameters, record);
    const known = [...states.slice(0, member.shape.signalCount), ...record.inputs.map((u) => u.subarray(record.from))];
    return states.slice(member.shape.signalCount).map((hidden) => regression(known, hidden));
  });
  return Float64Array.from(rows.flatMap((row) => Array.from(row)));
}

function regression(known: readonly Float64Array[], hidden: Float64Array): Float64Array {
  const p = known.length + 1;
  const gram = new Float64Array(p * p);
  const right = new Float64Array(p);
  const row = new Float64Array(p).fill(1);
  for (let t = 0; t < hidden.length; t++) {
    for (let k = 0; k < p - 1; k++) row[k] = known[k][t];
    for (let a = 0; a < p; a++) {
      right[a] += row[a] * hidden[t];
      for (let b = 0; b <= a; b++) gram[a * p + b] += row[a] * row[b];
    }
  }
  for (let a = 0; a < p; a++) gram[a * p + a] += PENALTY * hidden.length;
  solveCholesky(cholesky(gram, p), p, right, 1);
  return right;
}

/**
 * Ticks until runs of the rounded model begun far apart, under the record's inputs, are one; null where they never are: then
 * errors of a simulation would stay or grow, and it must not be used.
 *
 * shapes  record's inputs (nu)
 * units   ticks
 * throws  nothing
 * source  contraction seen, not proved: the inputs are those of the record
 * cost    two runs
 */
export function forgettingTicks(model: DrivenModel, record: DrivenRecord): number | null {
  const { step } = createState(model).core as DrivenCore;
  const above = startedAt(model, APART, record);
  const below = startedAt(model, -APART, record);
  const inputs = new Float64Array(record.inputs.length);
  let settled: number | null = null;
  const ticks = record.to - record.from;
  for (let n = 0; n < ROUNDS * ticks; n++) {
    for (let k = 0; k < inputs.length; k++) inputs[k] = record.inputs[k][record.from + (n % ticks)];
    stepMembers(step, above, inputs, 0);
    stepMembers(step, below, inputs, 0);
    const isOne = above.every((value, k) => Math.abs(value - below[k]) < FORGOTTEN);
    if (!isOne) settled = null;
    else settled ??= n + 1;
  }
  return settled;
}

/** States of every member as a first reading of all signals at a level would set them. */
function startedAt(model: DrivenModel, level: number, record: DrivenRecord): Float64Array {
  const { signalCount: ny, channelCount: nc, hiddenCount, start } = model;
  const known = [...record.signals.map(() => level), ...record.inputs.map((u) => u[record.from]), 1];
  return Float64Array.from({ length: model.order }, (_, at) => {
    const k = at % (ny + hiddenCount);
    if (k < ny) return level;
    const row = Math.floor(at / (ny + hiddenCount)) * hiddenCount + k - ny;
    return known.reduce((sum, value, c) => sum + start[row * (nc + 1) + c] * value, 0);
  });
}
