/**
 * A segment that was made without a bundle, back to readings. It says itself what its channels and their lattices are; each
 * channel's last value is the forecast. Readings off the lattice come as they were.
 */
import {
  type Correction,
  decodePlainState,
  encodePlainState,
  type Layout,
  readSegmentHead,
  SegmentReader,
} from '@stillwell/protocol';
import { TrainError } from '../errors.ts';

/**
 * shapes  lattice (ticks × nc) row-major, NaN missing; off: pairs of place in `lattice` and the reading that belongs there
 * units   lattice indices; readings off the lattice in their channel's unit
 */
export interface PlainReplay {
  readonly layout: Layout;
  readonly firstTick: number;
  readonly ticks: number;
  readonly lattice: Float64Array;
  readonly off: Float64Array;
  readonly corrections: readonly Correction[];
  readonly endState: Uint8Array;
  readonly readings: number;
}

/** Whether a segment's bundle, 64 hex digits, says that there was none. */
export function isWithoutBundle(bundle: string): boolean {
  return /^0{64}$/.test(bundle);
}

/**
 * Decodes one segment.
 *
 * before  end state of the segment before it; a keyed one carries its own
 * throws  ProtocolError where start or end state are not those that the gateway named, or the bytes are damaged;
 *         TrainError 'archive' where the start state is missing or of other channels
 */
export function replayPlain(bytes: Uint8Array, before: Uint8Array | null): PlainReplay {
  const { channels, reader, start } = open(bytes, before);
  const { firstTick, ticks } = reader.head;
  const count = channels.length;
  const last = start.last.slice();
  const lattice = new Float64Array(ticks * count);
  const off: number[] = [];
  const row = new Float64Array(count);
  let readings = 0;
  for (let i = 0; i < ticks; i++) {
    reader.next(last, row);
    lattice.set(row, i * count);
    for (let c = 0; c < count; c++) {
      const raw = reader.raw?.[c] ?? Number.NaN;
      if (!Number.isNaN(raw)) off.push(i * count + c, raw);
      if (!Number.isNaN(row[c])) last[c] = row[c]!;
      if (!Number.isNaN(row[c]) || !Number.isNaN(raw)) readings++;
    }
  }
  const { layout } = start;
  const endState = encodePlainState({ layout, tick: ticks > 0 ? firstTick + ticks - 1 : start.tick, last });
  reader.checkState('end', endState);
  const { corrections } = reader;
  return { layout, firstTick, ticks, lattice, off: Float64Array.from(off), corrections, endState, readings };
}

function open(bytes: Uint8Array, before: Uint8Array | null) {
  const { channelCount } = readSegmentHead(bytes);
  const reader = new SegmentReader(bytes, new Float64Array(channelCount).fill(Number.NaN));
  const { number, gateway, startState, signalCount } = reader.head;
  const state = startState ?? before;
  if (state === null)
    throw new TrainError('archive', `segment ${number} of ${gateway}: needs the end state of the one before it`);
  reader.checkState('start', state);
  const start = decodePlainState(state);
  const { channels } = start.layout;
  const signals = channels.filter(({ role }) => role === 'signal').length;
  if (channels.length !== channelCount || signals !== signalCount)
    throw new TrainError(
      'archive',
      `segment ${number} of ${gateway}: expected ${signals} signals of ${channels.length} channels as its start state ` +
        `has, got ${signalCount} of ${channelCount}`,
    );
  return { channels, reader, start };
}
