/** Everything a reading of a long history has gathered so far, put into a place and taken out of it again. */
import { Gathering } from './gathering.ts';
import type { GrowingList } from './growing.ts';
import type { FileRead } from './history.ts';
import type { OpenFile, StreamMerge, WaitingFile } from './merge.ts';
import type { OlderSink, OlderState, OlderTicks } from './older.ts';
import type { ReadingStream, StreamState } from './reading-stream.ts';
import type { RecentReadings, RecentState } from './recent.ts';
import type { Place } from './saved-place.ts';
import type { TimeReader, TimeState } from './times.ts';

/** The parts of a reading. */
export interface Reading {
  readonly merge: StreamMerge;
  readonly recent: RecentReadings;
  readonly older: OlderTicks;
  readonly times: TimeReader;
}

/** A list of numbers in the place, by its number there. */
interface SavedRows {
  readonly channels: readonly number[];
  readonly times: number;
  readonly values: readonly number[];
}

interface SavedFile {
  readonly path: string;
  readonly state: StreamState | null;
  readonly pending: readonly (SavedRows & { readonly lines: number | null; readonly lastMs: number | null })[];
}

interface SavedReading {
  readonly waiting: readonly { readonly path: string; readonly firstMs: number | null }[];
  readonly active: readonly SavedFile[];
  readonly finished: readonly FileRead[];
  readonly outOfOrder: number;
  readonly last: { readonly rowMs: number | null; readonly ms: readonly (number | null)[] } | null;
  readonly recent: RecentState;
  readonly groups: readonly (SavedRows & { readonly sortedTo: number })[];
  readonly older: OlderState;
  readonly sink: number;
  readonly times: TimeState;
}

const orNull = (value: number): number | null => (Number.isFinite(value) ? value : null);

/** Puts a reading, as it stands between two steps, into a place. */
export async function placeOf({ merge, recent, older, times }: Reading, sink: OlderSink): Promise<Place> {
  const lists: Uint8Array[] = [];
  const put = (numbers: Float64Array): number =>
    lists.push(new Uint8Array(numbers.buffer, numbers.byteOffset, numbers.byteLength)) - 1;
  const data: SavedReading = {
    waiting: merge.waiting.map(({ path, firstMs }) => ({ path, firstMs: orNull(firstMs) })),
    active: merge.active.map((file) => savedFile(file, put)),
    finished: merge.finished,
    outOfOrder: merge.outOfOrder,
    last:
      merge.last === null
        ? null
        : { rowMs: orNull(merge.last.previousRowMs), ms: Array.from(merge.last.previousMs, orNull) },
    recent: recent.state(),
    groups: [...recent.groups].map(({ channels, head, sortedTo, times: rows, values }) => ({
      ...{ channels, sortedTo: sortedTo - head, times: put(rows.view(head)) },
      values: values.map((list) => put(list.view(head))),
    })),
    older: older.state(),
    sink: lists.push(await sink.snapshot()) - 1,
    times: times.state(),
  };
  return { data, lists };
}

function savedFile({ stream, taken }: OpenFile, put: (numbers: Float64Array) => number): SavedFile {
  const pending = stream.gathering.blocks.map((block) => {
    const mark = taken.get(block);
    const from = mark?.count ?? 0;
    const columns = block.values.flatMap((list, c) => (list === null ? [] : [{ c, list }]));
    return {
      channels: columns.map(({ c }) => c),
      times: put(block.times.view(from)),
      values: columns.map(({ list }) => put(list.view(from))),
      lines: block.lines === null ? null : put(block.lines.view(from)),
      lastMs: orNull(mark?.lastMs ?? Number.NEGATIVE_INFINITY),
    };
  });
  return { path: stream.path, state: stream.state(), pending };
}

/**
 * Fills the parts of a new reading from a place.
 *
 * open  opens a file where it stood
 */
export async function takeOut(
  { data, lists }: Place,
  { merge, recent, older, times }: Reading,
  sink: OlderSink,
  open: (path: string, state: StreamState | null) => ReadingStream,
): Promise<void> {
  const saved = data as SavedReading;
  const get = (number: number): Float64Array => new Float64Array((lists[number] as Uint8Array).buffer as ArrayBuffer);
  times.restore(saved.times);
  merge.waiting.splice(0, merge.waiting.length, ...saved.waiting.map(waitingOf));
  merge.finished.push(...saved.finished);
  merge.outOfOrder = saved.outOfOrder;
  merge.last = saved.last === null ? null : lastOf(saved.last);
  for (const { path, state, pending } of saved.active) {
    const file: OpenFile = { stream: open(path, state), taken: new Map() };
    for (const rows of pending) refill(file, rows, get);
    merge.active.push(file);
  }
  for (const { channels, sortedTo, times: rows, values } of saved.groups) {
    const group = recent.group(channels);
    group.times.append(get(rows));
    group.sortedTo = sortedTo;
    values.forEach((number, k) => {
      (group.values[k] as GrowingList).append(get(number));
    });
  }
  recent.restore(saved.recent);
  older.restore(saved.older);
  await sink.restore(lists[saved.sink] as Uint8Array);
}

function waitingOf({ path, firstMs }: { readonly path: string; readonly firstMs: number | null }): WaitingFile {
  return { path, firstMs: firstMs ?? Number.POSITIVE_INFINITY };
}

function lastOf({ rowMs, ms }: NonNullable<SavedReading['last']>): Gathering {
  const everything = { fromMs: Number.NEGATIVE_INFINITY, untilMs: Number.POSITIVE_INFINITY };
  const gathering = new Gathering(ms.length, everything);
  gathering.previousRowMs = rowMs ?? Number.NEGATIVE_INFINITY;
  ms.forEach((one, c) => {
    gathering.previousMs[c] = one ?? Number.NEGATIVE_INFINITY;
  });
  return gathering;
}

/** Puts rows that were read but not yet taken away back into a file's lists. */
function refill(file: OpenFile, rows: SavedFile['pending'][number], get: (number: number) => Float64Array): void {
  const { gathering } = file.stream;
  const block = gathering.blockFor(rows.channels);
  block.times.append(get(rows.times));
  rows.channels.forEach((channel, k) => {
    block.values[channel]?.append(get(rows.values[k] as number));
  });
  if (rows.lines !== null) block.lines?.append(get(rows.lines));
  file.taken.set(block, { count: 0, lastMs: rows.lastMs ?? Number.NEGATIVE_INFINITY });
}
