/**
 * The readings of a site as the desk recovered them: what the filter saw, tick by tick, and beside it the same with late
 * readings merged in. The result depends on which segments are kept, never on the order they came in.
 */
import { inflateRawSync } from 'node:zlib';
import { latticeIndex, latticeValue } from '@stillwell/protocol';
import { sql } from 'kysely';
import { TrainError } from '../errors.ts';
import type { Lattice } from '../history/resolution.ts';
import { type KnownLayout, Layouts } from './layouts.ts';
import { openArchive, type Store, toBytes } from './store/open.ts';

/** Half a unit in the last place of a 32-bit float, relative: such a reading stands for decimals. */
const SINGLE_TOLERANCE = 2 ** -24;
/** Wild readings do not show that a lattice is another one. */
const MOST_STRAYS = 0.01;

/** One signal or input of an archive. */
export interface ArchivedChannel {
  readonly name: string;
  readonly role: 'signal' | 'input';
  readonly unit: string;
  /** With late readings merged; NaN missing. */
  readonly values: Float64Array;
  /** As the filter saw them when the tick closed; NaN missing. */
  readonly original: Float64Array;
  /** Null where no bundle said it and the readings do not lie on what the gateway found: then it is to be found in them. */
  readonly lattice: { readonly step: number; readonly offset: number } | null;
  /** (n) k: the reading lies on every 2^k-th step of the lattice, as the gateway's byte budget had it; absent: none coarser. */
  readonly coarseness?: Uint8Array;
}

/**
 * shapes  ticks (n), ascending, absolute since 1970; values and original (n) each
 * units   as the last segment's bundle says, or that segment itself; channels in its order, then those that only older
 *         segments had
 */
export interface Archive {
  readonly site: string;
  readonly tickMs: number;
  readonly ticks: Float64Array;
  readonly channels: readonly ArchivedChannel[];
  readonly segments: number;
  /** Late readings that changed or filled a value. */
  readonly corrections: number;
  /** Hex digests of the bundles the segments were made with, in the order of their first ticks. */
  readonly bundles: readonly string[];
}

/**
 * Reads a site's archive out of a desk's data folder, also while a desk is writing to it.
 *
 * sinceTick  only segments that reach beyond this tick are read, and late readings from there on: what a refit from
 *            factors has not learned yet, at a cost that knows nothing of the archive's length
 * throws     TrainError 'archive' when there is no store, or nothing of the site is decoded in it, or nothing since then
 */
export async function readArchive(folder: string, site: string, sinceTick = Number.MIN_SAFE_INTEGER): Promise<Archive> {
  const store = await openArchive(folder);
  try {
    return await readSite(store, site, sinceTick);
  } finally {
    await store.close();
  }
}

/** As readArchive, on a store that is open. */
export async function readSite(store: Store, site: string, sinceTick = Number.MIN_SAFE_INTEGER): Promise<Archive> {
  const spans = await store.db
    .selectFrom('spans')
    .innerJoin('segments', 'segments.id', 'spans.segment')
    .select(['spans.bundle', 'spans.first_tick', 'spans.ticks', 'spans.channels', 'spans.lattice', 'spans.coarseness'])
    .where('spans.site', '=', site)
    .where(sql<boolean>`spans.first_tick + spans.ticks > ${sinceTick}`)
    .orderBy('spans.first_tick')
    .orderBy('segments.gateway')
    .orderBy('segments.stream')
    .orderBy('segments.number')
    .execute();
  if (spans.length === 0) throw await nothingOf(store, site, sinceTick);
  const late = await store.db
    .selectFrom('corrections')
    .innerJoin('segments', 'segments.id', 'corrections.segment')
    .select(['corrections.bundle', 'corrections.tick', 'corrections.channel', 'corrections.lattice'])
    .where('corrections.site', '=', site)
    .where('corrections.tick', '>=', sinceTick)
    .orderBy('segments.gateway')
    .orderBy('segments.stream')
    .orderBy('segments.number')
    .orderBy('corrections.entry')
    .execute();
  const layouts = await layoutsOf(store, spans);
  const last = layouts.get(spans[spans.length - 1]!.bundle)!;
  const { tickMs } = last.layout;
  const usable = <T extends { bundle: string }>(row: T): boolean => layouts.get(row.bundle)?.layout.tickMs === tickMs;
  const grid = new Grid(last, layouts);
  const kept = spans.filter(usable);
  for (const span of kept) grid.cover(span.first_tick, span.ticks);
  const lateKept = late.filter(usable);
  for (const one of lateKept) grid.cover(one.tick, 1);
  grid.open();
  for (const span of kept) grid.lay(span, unpackNumbers(toBytes(span.lattice)));
  grid.keepOriginal();
  let corrections = 0;
  for (const one of lateKept) if (grid.correct(one.bundle, one.tick, one.channel, one.lattice)) corrections++;
  const made = grid.finish();
  const bundles = [...layouts].filter(([, { isOfBundle }]) => isOfBundle).map(([digest]) => digest);
  return { site, tickMs, ...made, segments: kept.length, corrections, bundles };
}

async function nothingOf(store: Store, site: string, sinceTick: number): Promise<TrainError> {
  const last = await store.db
    .selectFrom('spans')
    .select(({ fn }) => fn.max<number | null>(sql`first_tick + ticks`).as('end'))
    .where('site', '=', site)
    .executeTakeFirst();
  if (last !== undefined && last.end !== null && last.end <= sinceTick) {
    return new TrainError(
      'archive',
      `${store.folder}: no readings of site "${site}" newer than what the factors hold; the archive ends ` +
        `${sinceTick - last.end === 0 ? 'where they do' : `${sinceTick - last.end} ticks before them`}. Collect more, then refit.`,
    );
  }
  const rows = await store.db.selectFrom('segments').select('site').distinct().orderBy('site').execute();
  const known = rows.map((row) => row.site).join(', ');
  return new TrainError(
    'archive',
    `${store.folder}: nothing decoded of site "${site}"; ` +
      (known === '' ? 'the archive is empty' : `segments are kept of: ${known}; see \`stillwell desk status\``),
  );
}

async function layoutsOf(store: Store, spans: readonly { bundle: string }[]): Promise<Map<string, KnownLayout>> {
  const known = new Layouts(store);
  const layouts = new Map<string, KnownLayout>();
  for (const { bundle } of spans) {
    if (layouts.has(bundle)) continue;
    const found = await known.find(bundle);
    if (found) layouts.set(bundle, found);
  }
  return layouts;
}

/** Ticks first <= n < end, the first of them in row `at`. */
interface Run {
  readonly first: number;
  end: number;
  readonly at: number;
}

/** What the store says of a span. */
interface LaidSpan {
  readonly bundle: string;
  readonly first_tick: number;
  readonly ticks: number;
  readonly channels: number;
  readonly coarseness: ArrayBuffer | Uint8Array | null;
}

/** Columns by channel name over the union of all covered ticks. */
class Grid {
  readonly #layouts: ReadonlyMap<string, KnownLayout>;
  readonly #channels: { name: string; role: 'signal' | 'input'; unit: string; lattice: Lattice }[];
  readonly #columnOf = new Map<string, number>();
  /** Channels whose lattice no bundle says. */
  readonly #unsure = new Set<string>();
  #runs: Run[] = [];
  #ticks = new Float64Array(0);
  #values: Float64Array[] = [];
  #original: Float64Array[] = [];
  /** By column; undefined while every reading of it is as fine as its sensor. */
  readonly #coarseness: (Uint8Array | undefined)[] = [];

  constructor(last: KnownLayout, layouts: ReadonlyMap<string, KnownLayout>) {
    this.#layouts = layouts;
    this.#channels = [];
    // The newest first: without a bundle it has the step that a gateway knew last.
    for (const { layout, isOfBundle } of [last, ...[...layouts.values()].reverse()]) {
      for (const { name, role, unit, lattice } of layout.channels) {
        if (this.#columnOf.has(name)) continue;
        this.#columnOf.set(name, this.#channels.length);
        this.#channels.push({ name, role, unit, lattice });
        if (!isOfBundle) this.#unsure.add(name);
      }
    }
  }

  cover(first: number, ticks: number): void {
    if (ticks > 0) this.#runs.push({ first, end: first + ticks, at: 0 });
  }

  /** Joins what is covered into runs without overlap and makes room for it. */
  open(): void {
    const runs: Run[] = [];
    let length = 0;
    for (const run of this.#runs.sort((a, b) => a.first - b.first)) {
      const before = runs[runs.length - 1];
      if (before && run.first <= before.end) {
        length += Math.max(0, run.end - before.end);
        before.end = Math.max(before.end, run.end);
      } else {
        runs.push({ ...run, at: length });
        length += run.end - run.first;
      }
    }
    this.#runs = runs;
    this.#ticks = new Float64Array(length);
    for (const { first, end, at } of runs)
      for (let tick = first; tick < end; tick++) this.#ticks[at + tick - first] = tick;
    this.#values = this.#channels.map(() => new Float64Array(length).fill(Number.NaN));
  }

  /** numbers  (ticks × channels) lattice indices, then pairs of place and reading for what lay off the lattice */
  lay(span: LaidSpan, numbers: Float64Array): void {
    const { channels } = this.#layouts.get(span.bundle)!.layout;
    const { ticks, channels: count } = span;
    const at = ticks > 0 ? this.#place(span.first_tick) : 0;
    const coarseness = span.coarseness === null ? new Uint8Array(count) : toBytes(span.coarseness);
    for (let c = 0; c < count; c++) {
      const { step, offset } = channels[c]!.lattice;
      const column = this.#columnFor(channels[c]!);
      const marks = this.#marks(channels[c]!.name, coarseness[c]!);
      for (let i = 0; i < ticks; i++) {
        const index = numbers[i * count + c]!;
        // Where two streams cover a tick, a reading beats a gap.
        if (Number.isNaN(index)) continue;
        column[at + i] = latticeValue(index, step, offset);
        if (marks !== undefined) marks[at + i] = coarseness[c]!;
      }
    }
    for (let i = ticks * count; i < numbers.length; i += 2) {
      const place = numbers[i]!;
      this.#columnFor(channels[place % count]!)[at + Math.floor(place / count)] = numbers[i + 1]!;
    }
  }

  #marks(name: string, power: number): Uint8Array | undefined {
    const column = this.#columnOf.get(name)!;
    if (power > 0) this.#coarseness[column] ??= new Uint8Array(this.#ticks.length);
    return this.#coarseness[column];
  }

  keepOriginal(): void {
    this.#original = this.#values.map((column) => column.slice());
  }

  correct(digest: string, tick: number, channel: number, index: number): boolean {
    const one = this.#layouts.get(digest)!.layout.channels[channel]!;
    const column = this.#columnFor(one);
    const at = this.#place(tick);
    const marks = this.#marks(one.name, 0);
    if (marks !== undefined) marks[at] = 0;
    const value = latticeValue(index, one.lattice.step, one.lattice.offset);
    if (column[at] === value) return false;
    column[at] = value;
    return true;
  }

  finish(): { ticks: Float64Array; channels: ArchivedChannel[] } {
    const channels = this.#channels.map((channel, i) => ({
      ...channel,
      lattice: this.#unsure.has(channel.name) ? heldLattice(this.#values[i]!, channel.lattice) : channel.lattice,
      values: this.#values[i]!,
      original: this.#original[i]!,
      ...(this.#coarseness[i] === undefined ? {} : { coarseness: this.#coarseness[i] }),
    }));
    return { ticks: this.#ticks, channels };
  }

  #columnFor({ name }: { readonly name: string }): Float64Array {
    return this.#values[this.#columnOf.get(name)!]!;
  }

  #place(tick: number): number {
    let low = 0;
    let high = this.#runs.length - 1;
    while (low < high) {
      const middle = (low + high + 1) >> 1;
      if (this.#runs[middle]!.first <= tick) low = middle;
      else high = middle - 1;
    }
    const run = this.#runs[low]!;
    return run.at + tick - run.first;
  }
}

/** A lattice that nearly all values lie on, strays aside; null where it is not theirs. */
function heldLattice(values: Float64Array, lattice: Lattice): Lattice | null {
  let present = 0;
  let off = 0;
  for (const value of values) {
    if (Number.isNaN(value)) continue;
    present++;
    const near = latticeValue(latticeIndex(value, lattice.step, lattice.offset), lattice.step, lattice.offset);
    if (Math.abs(near - value) > Math.abs(value) * SINGLE_TOLERANCE) off++;
  }
  return off > MOST_STRAYS * present ? null : lattice;
}

/** Most bytes one span can unfold to: the most values of a segment and a pair for each, 8 bytes a number. */
const MAX_SPAN_BYTES = 3 * 8 * (1 << 21);

function unpackNumbers(deflated: Uint8Array): Float64Array {
  const bytes = inflateRawSync(deflated, { maxOutputLength: MAX_SPAN_BYTES });
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  const numbers = new Float64Array(bytes.length / 8);
  for (let i = 0; i < numbers.length; i++) numbers[i] = view.getFloat64(i * 8, true);
  return numbers;
}
