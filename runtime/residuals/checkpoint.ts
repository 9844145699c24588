/**
 * Where the open segment started: the filter's state and bounds at that tick, and the segment's number. Together with the
 * journal of the same number it gives the gateway's whole state back. Replaced atomically at each segment boundary; that
 * replacement is the instant at which a boundary, or a change of bundle, has happened.
 *
 * | offset | size | meaning (big-endian) |
 * | --- | --- | --- |
 * | 0 | 4 | magic "SWC2"; "SWC1" ends with the bounds |
 * | 4 | 4 | CRC-32 of all that follows |
 * | 8 | 8 | stream id |
 * | 16 | 4 | number of the segment that starts here |
 * | 20 | 4 | segments since the last keyed one, this one counted; 0: this one is keyed |
 * | 24 | 32 | digest of the bundle document |
 * | 56 | 4 | bytes of the filter's state; 0: before its first tick |
 * | 60 | 4 | bytes of the bounds |
 * | 64 | .. | state, then bounds |
 * | then | 8 | bytes a tick of late, starts in full left out (float64) |
 * | then | 8 | ticks behind that figure (float64) |
 * | then | 4 | bytes of the last start in full |
 * | then | nc | coarseness of each channel |
 */
import { crc32 } from 'node:zlib';
import type { BudgetState } from './budget.ts';

/** Where a segment starts. */
export interface Checkpoint {
  readonly stream: Uint8Array;
  readonly number: number;
  readonly sinceKeyed: number;
  readonly bundle: Uint8Array;
  /** As saveState wrote it; empty: a state before its first tick. */
  readonly state: Uint8Array;
  readonly bounds: Uint8Array;
  /** Null in checkpoints of earlier programs. */
  readonly budget: BudgetState | null;
}

const MAGIC = 0x53574332;
const MAGIC_BEFORE = 0x53574331;
const HEAD_BYTES = 64;
const BUDGET_BYTES = 20;

/** The checkpoint's bytes. */
export function encodeCheckpoint(checkpoint: Checkpoint): Uint8Array {
  const { state, bounds, budget } = checkpoint;
  const rest = budget === null ? 0 : BUDGET_BYTES + budget.coarseness.length;
  const bytes = Buffer.alloc(HEAD_BYTES + state.length + bounds.length + rest);
  bytes.writeUInt32BE(budget === null ? MAGIC_BEFORE : MAGIC, 0);
  bytes.set(checkpoint.stream, 8);
  bytes.writeUInt32BE(checkpoint.number, 16);
  bytes.writeUInt32BE(checkpoint.sinceKeyed, 20);
  bytes.set(checkpoint.bundle, 24);
  bytes.writeUInt32BE(state.length, 56);
  bytes.writeUInt32BE(bounds.length, 60);
  bytes.set(state, HEAD_BYTES);
  bytes.set(bounds, HEAD_BYTES + state.length);
  if (budget !== null) writeBudget(bytes, bytes.length - rest, budget);
  bytes.writeUInt32BE(crc32(bytes.subarray(8)), 4);
  return new Uint8Array(bytes);
}

/** Null when the bytes do not check. */
export function decodeCheckpoint(bytes: Uint8Array): Checkpoint | null {
  if (bytes.length < HEAD_BYTES) return null;
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  const isBefore = view.getUint32(0) === MAGIC_BEFORE;
  if ((!isBefore && view.getUint32(0) !== MAGIC) || view.getUint32(4) !== crc32(bytes.subarray(8))) return null;
  const stateEnd = HEAD_BYTES + view.getUint32(56);
  const boundsEnd = stateEnd + view.getUint32(60);
  if (isBefore ? bytes.length !== boundsEnd : bytes.length < boundsEnd + BUDGET_BYTES) return null;
  return {
    stream: bytes.slice(8, 16),
    number: view.getUint32(16),
    sinceKeyed: view.getUint32(20),
    bundle: bytes.slice(24, 56),
    state: bytes.slice(HEAD_BYTES, stateEnd),
    bounds: bytes.slice(stateEnd, boundsEnd),
    budget: isBefore ? null : readBudget(bytes, view, boundsEnd),
  };
}

function writeBudget(bytes: Buffer, at: number, budget: BudgetState): void {
  bytes.writeDoubleBE(budget.bytesPerTick, at);
  bytes.writeDoubleBE(budget.ticks, at + 8);
  bytes.writeUInt32BE(budget.startBytes, at + 16);
  bytes.set(budget.coarseness, at + BUDGET_BYTES);
}

function readBudget(bytes: Uint8Array, view: DataView, at: number): BudgetState {
  return {
    bytesPerTick: view.getFloat64(at),
    ticks: view.getFloat64(at + 8),
    startBytes: view.getUint32(at + 16),
    coarseness: bytes.slice(at + BUDGET_BYTES),
  };
}
