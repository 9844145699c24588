/**
 * Snapshots of the state and of the bounds: exact float64 and float32 bits, little-endian, versioned, checked by CRC-32.
 * Equal states give equal bytes (kernels write their memories in one order), so two machines can prove to each other that they stand
 * at the same point by comparing checksums. A state's snapshot holds only what moves one-step predictions.
 *
 * | offset | size | meaning |
 * | 0  | 4 | magic, "SWfs" (state) or "SWfb" (bounds) |
 * | 4  | 2 | snapshot version, 1 |
 * | 6  | 2 | arithmetic version |
 * | 8  | 4 | CRC-32 of the model's shapes, poles, lags and scaling: another model refuses the snapshot |
 * | 12 | 8 | tick, float64 |
 * | 20 | … | state: per channel started u8, passed u16, age u16, lean i16, then float64 value and what the kind keeps of the channel |
 * |    |   | (linear: memories, ring oldest first), and after the channels what it keeps of no channel alone; then the |
 * |    |   | last round of every signal that has one, oldest first; then, with a guard against sensors that hang, per signal |
 * |    |   | readings alike u16 and the reading float64; then, with agreement, the two sums of every signal, float64 |
 * |    |   | bounds: warmed u32, radius and, unless tracked as in the first bundles, stretch float64 (ny × scored steps each), |
 * |    |   | forecasts under way float32 as `Bounds.issued` |
 * | end − 4 | 4 | CRC-32 of all before |
 */
import { ARITHMETIC } from '@stillwell/protocol';
import { crc32 } from './checksum.ts';
import { FilterError } from './errors.ts';
import { type Bounds, createBounds } from './interval.ts';
import { kernelOf } from './kernels.ts';
import type { Model } from './model.ts';
import { restOf } from './round.ts';
import { createState, type FilterState, fadeTicks } from './state.ts';
import { LEAST_STRETCH, MOST_STRETCH, spreadRadii } from './tracking.ts';

const VERSION = 1;
const HEAD = 20;
const STATE_MAGIC = 0x53576673;
const BOUNDS_MAGIC = 0x53576662;

/** Numbers of the rounds: W + 1 for each signal that has one. */
function roundCount({ round }: Model): number {
  if (round === undefined) return 0;
  return (round.ticks + 1) * round.weight.filter((weight) => weight !== 0).length;
}

/** Visits every number of the rounds, oldest first, so that equal states give equal bytes. */
function eachOfRounds({ round }: Model, state: FilterState, visit: (slot: number) => void): void {
  if (round === undefined) return;
  const length = round.ticks + 1;
  for (let i = 0; i < round.weight.length; i++) {
    if (round.weight[i] === 0) continue;
    for (let k = 1; k <= length; k++) visit(i * length + ((state.tick + k + length) % length));
  }
}

/** Bytes of what watches over sensors: ten a signal with a guard against those that hang, sixteen with agreement. */
function watchBytes({ stuck, agreement, signalCount }: Model): number {
  return (stuck === undefined ? 0 : 10 * signalCount) + (agreement === undefined ? 0 : 16 * signalCount);
}

/**
 * Bytes of a state's snapshot, whatever the state.
 *
 * shapes  of a model whose kernel has checked it
 */
export function stateSize(model: Model): number {
  const { perChannel, shared } = kernelOf(model).memoryLayout(model);
  return (
    HEAD + model.channelCount * (7 + 8 * (1 + perChannel)) + 8 * (shared + roundCount(model)) + watchBytes(model) + 4
  );
}

/**
 * The state's snapshot.
 *
 * shapes  24 + nc · (7 + 8 · (1 + numbers of a channel)) + 8 · shared numbers bytes; linear: memoryCount + ringLength a channel
 */
export function saveState(model: Model, state: FilterState): Uint8Array {
  const kernel = kernelOf(model);
  const { perChannel, shared } = kernel.memoryLayout(model);
  const bytes = new Uint8Array(stateSize(model));
  const view = writeHead(bytes, STATE_MAGIC, model, state.tick);
  const numbers = new Float64Array(Math.max(perChannel, shared));
  let at = HEAD;
  for (let c = 0; c < model.channelCount; c++) {
    view.setUint8(at, state.started[c]);
    view.setUint16(at + 1, state.passed[c], true);
    view.setUint16(at + 3, state.age[c], true);
    view.setInt16(at + 5, state.lean[c], true);
    at = putFloats(view, at + 7, state.value, c, c + 1);
    kernel.copyOut(model, state.core, c, numbers, 0);
    at = putFloats(view, at, numbers, 0, perChannel);
  }
  kernel.copyOut(model, state.core, -1, numbers, 0);
  at = putFloats(view, at, numbers, 0, shared);
  eachOfRounds(model, state, (slot) => {
    view.setFloat64(at, state.roundMemory[slot], true);
    at += 8;
  });
  for (let i = 0; i < state.repeats.length; i++, at += 10) {
    view.setUint16(at, state.repeats[i], true);
    view.setFloat64(at + 2, state.repeated[i], true);
  }
  at = putFloats(view, at, state.disagreement, 0, state.disagreement.length);
  view.setUint32(at, crc32(bytes, 0, at), true);
  return bytes;
}

/**
 * The state a snapshot was taken of; filtering on from it gives the same bits as never having stopped. The last tick's
 * readings and innovations are not kept: they stand as missing until the next update.
 *
 * throws  FilterError 'snapshot' if the bytes are damaged, of another version, or of another model
 */
export function restoreState(model: Model, bytes: Uint8Array): FilterState {
  const kernel = kernelOf(model);
  const { perChannel, shared } = kernel.memoryLayout(model);
  const state = createState(model);
  const view = readHead(bytes, STATE_MAGIC, model, stateSize(model), 'state');
  const numbers = new Float64Array(Math.max(perChannel, shared));
  const allFinite = (count: number): boolean => numbers.subarray(0, count).every(Number.isFinite);
  state.tick = view.getFloat64(12, true);
  let at = HEAD;
  let areFinite = true;
  for (let c = 0; c < model.channelCount; c++) {
    state.started[c] = view.getUint8(at);
    state.passed[c] = view.getUint16(at + 1, true);
    state.age[c] = view.getUint16(at + 3, true);
    state.lean[c] = view.getInt16(at + 5, true);
    const isInRange =
      state.started[c] <= 1 && state.passed[c] <= model.rejectMaxTicks && state.age[c] <= 2 * fadeTicks(model);
    if (!isInRange) throw refusal('state', `channel ${c}`, 'counters in range', 'one beyond it');
    at = getFloats(view, at + 7, state.value, c, c + 1);
    at = getFloats(view, at, numbers, 0, perChannel);
    areFinite &&= Number.isFinite(state.value[c]) && allFinite(perChannel);
    kernel.copyIn(model, state.core, c, numbers, 0);
  }
  at = getFloats(view, at, numbers, 0, shared);
  areFinite &&= allFinite(shared);
  eachOfRounds(model, state, (slot) => {
    state.roundMemory[slot] = view.getFloat64(at, true);
    areFinite &&= Math.abs(state.roundMemory[slot]) !== Number.POSITIVE_INFINITY;
    at += 8;
  });
  for (let i = 0; i < state.repeats.length; i++, at += 10) {
    state.repeats[i] = view.getUint16(at, true);
    state.repeated[i] = view.getFloat64(at + 2, true);
    areFinite &&= Number.isFinite(state.repeated[i]);
  }
  at = getFloats(view, at, state.disagreement, 0, state.disagreement.length);
  areFinite &&= state.disagreement.every(Number.isFinite);
  if (!areFinite) throw refusal('state', 'memories', 'finite numbers', 'NaN or infinity');
  kernel.copyIn(model, state.core, -1, numbers, 0);
  if (model.round !== undefined) {
    for (let c = 0; c < model.channelCount; c++) {
      state.rest[c] = c < model.signalCount ? restOf(model.round, state, c, state.tick) : state.value[c];
    }
  }
  if (state.tick >= 0) kernel.refresh(model, state.core, state);
  return state;
}

/**
 * The bounds' snapshot; larger than the state's, since it holds the forecasts still to be scored.
 *
 * shapes  28 + 16 · ny · scored steps + 4 · issued bytes; 28 + 8 · ny · H + 2 · ny · H(H + 1) for bundles without a long rate
 */
export function saveBounds(model: Model, bounds: Bounds): Uint8Array {
  const bytes = new Uint8Array(boundsSize(bounds));
  const view = writeHead(bytes, BOUNDS_MAGIC, model, bounds.tick);
  view.setUint32(HEAD, bounds.warmed, true);
  let at = HEAD + 4;
  for (const values of trackedParts(bounds)) {
    for (const cell of scoredCells(model, bounds)) at = putFloats(view, at, values, cell, cell + 1);
  }
  for (let k = 0; k < bounds.issued.length; k++, at += 4) view.setFloat32(at, bounds.issued[k], true);
  view.setUint32(at, crc32(bytes, 0, at), true);
  return bytes;
}

/**
 * The bounds a snapshot was taken of.
 *
 * throws  FilterError 'snapshot' if the bytes are damaged, of another version, or of another model
 */
export function restoreBounds(model: Model, bytes: Uint8Array): Bounds {
  const bounds = createBounds(model);
  const view = readHead(bytes, BOUNDS_MAGIC, model, boundsSize(bounds), 'bounds');
  bounds.tick = view.getFloat64(12, true);
  bounds.warmed = view.getUint32(HEAD, true);
  let at = HEAD + 4;
  for (const values of trackedParts(bounds)) {
    for (const cell of scoredCells(model, bounds)) at = getFloats(view, at, values, cell, cell + 1);
  }
  for (let k = 0; k < bounds.issued.length; k++, at += 4) bounds.issued[k] = view.getFloat32(at, true);
  for (const k of scoredCells(model, bounds)) {
    const ceiling = bounds.ceiling[Math.floor(k / model.horizon)];
    if (!(bounds.radius[k] >= bounds.floor[k] && bounds.radius[k] <= ceiling)) {
      throw refusal('bounds', `radius ${k}`, `${bounds.floor[k]} to ${ceiling}`, bounds.radius[k]);
    }
    if (bounds.stretch[k] >= LEAST_STRETCH && bounds.stretch[k] <= MOST_STRETCH) continue;
    throw refusal('bounds', `stretch ${k}`, `${LEAST_STRETCH} to ${MOST_STRETCH}`, bounds.stretch[k]);
  }
  for (let i = 0; i < model.signalCount; i++) spreadRadii(model, bounds, i);
  return bounds;
}

function boundsSize(bounds: Bounds): number {
  const signals = bounds.ceiling.length;
  return HEAD + 4 + 8 * signals * bounds.steps.length * trackedParts(bounds).length + 4 * bounds.issued.length + 4;
}

/** What tracking has moved, by signal and scored step; the rest follows from it. */
function trackedParts(bounds: Bounds): readonly Float64Array[] {
  return bounds.issuedWidth === 1 ? [bounds.radius] : [bounds.radius, bounds.stretch];
}

function scoredCells(model: Model, bounds: Bounds): readonly number[] {
  return Array.from(bounds.ceiling).flatMap((_, i) => Array.from(bounds.steps, (h) => i * model.horizon + h - 1));
}

function writeHead(bytes: Uint8Array, magic: number, model: Model, tick: number): DataView {
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  view.setUint32(0, magic, false);
  view.setUint16(4, VERSION, true);
  view.setUint16(6, ARITHMETIC, true);
  view.setUint32(8, fingerprint(model), true);
  view.setFloat64(12, tick, true);
  return view;
}

/** Checks everything about a snapshot but its contents, cheapest first. */
function readHead(bytes: Uint8Array, magic: number, model: Model, size: number, what: string): DataView {
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  if (bytes.length < HEAD + 4) throw refusal(what, 'length', `${size} bytes`, `${bytes.length} bytes`);
  if (view.getUint32(0, false) !== magic) throw refusal(what, 'magic', `a ${what} snapshot`, 'other bytes');
  const version = view.getUint16(4, true);
  if (version !== VERSION) throw refusal(what, 'version', VERSION, version);
  const arithmetic = view.getUint16(6, true);
  if (arithmetic !== ARITHMETIC) throw refusal(what, 'arithmetic', ARITHMETIC, arithmetic);
  if (view.getUint32(8, true) !== fingerprint(model)) throw refusal(what, 'model', 'the model given', 'another one');
  if (bytes.length !== size) throw refusal(what, 'length', `${size} bytes`, `${bytes.length} bytes`);
  const sum = crc32(bytes, 0, size - 4);
  const stated = view.getUint32(size - 4, true);
  if (sum !== stated) throw refusal(what, 'CRC-32', stated.toString(16), sum.toString(16));
  const tick = view.getFloat64(12, true);
  if (!Number.isSafeInteger(tick) || tick < -1) throw refusal(what, 'tick', 'a whole number from -1', tick);
  return view;
}

/** CRC-32 over what gives a snapshot's numbers their meaning. */
function fingerprint(model: Model): number {
  const parts = [
    Float64Array.of(model.channelCount, model.signalCount, model.horizon, model.rejectMaxTicks, model.tickMs),
    ...kernelOf(model).fingerprint(model),
    ...(model.round === undefined ? [] : [Float64Array.of(model.round.ticks), model.round.weight]),
    ...(model.agreement === undefined ? [] : [model.agreement.weights, model.agreement.limit]),
    ...(model.stuck === undefined ? [] : [Float64Array.from(model.stuck.ticks), ...model.stuck.rests]),
    model.mean,
    model.scale,
  ];
  const count = parts.reduce((sum, part) => sum + part.length, 0);
  const bytes = new Uint8Array(8 * count);
  const view = new DataView(bytes.buffer);
  let at = 0;
  for (const part of parts) at = putFloats(view, at, part, 0, part.length);
  return crc32(bytes);
}

function putFloats(view: DataView, at: number, values: Float64Array, from: number, until: number): number {
  for (let k = from; k < until; k++, at += 8) view.setFloat64(at, values[k], true);
  return at;
}

function getFloats(view: DataView, at: number, values: Float64Array, from: number, until: number): number {
  for (let k = from; k < until; k++, at += 8) values[k] = view.getFloat64(at, true);
  return at;
}

function refusal(what: string, field: string, expected: unknown, got: unknown): FilterError {
  return new FilterError(
    'snapshot',
    `${what} snapshot, ${field}: expected ${expected}, got ${got}; start anew and warm up`,
    {
      details: { field, expected, got },
    },
  );
}
