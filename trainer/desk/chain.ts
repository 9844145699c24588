/**
 * Decodes what has been taken in, in the order the chain of states allows: a keyed segment any time, a chained one after
 * its predecessor. Each decoded segment is one transaction; what cannot be decoded yet stays safe and waits. A break is
 * recorded with its reason and ends at the next keyed segment.
 */
import { deflateRawSync } from 'node:zlib';
import type { Correction } from '@stillwell/protocol';
import type { Kysely } from 'kysely';
import { keepLayout } from './layouts.ts';
import { type Replay, replaySegment } from './replay.ts';
import { isWithoutBundle, type PlainReplay, replayPlain } from './replay-plain.ts';
import type { Shelf } from './shelf.ts';
import { type Store, toBytes } from './store/open.ts';
import type { Tables } from './store/schema.ts';

/** What happened to a segment beyond its arrival. */
export interface ChainEvent {
  readonly kind: 'decoded' | 'broken' | 'waiting';
  readonly site: string;
  readonly gateway: string;
  readonly stream: string;
  readonly number: number;
  /** Readings recovered, where decoded. */
  readonly readings: number | null;
  /** Bytes of the segment. */
  readonly size: number;
  readonly reason: string | null;
}

/** A segment of one stream. */
export interface StreamPlace {
  readonly site: string;
  readonly gateway: string;
  readonly stream: string;
  readonly number: number;
}

type Row = Awaited<ReturnType<Chain['find']>>;

/** What is kept of a decoded segment, however it was made. */
interface Decoded {
  /** Digest of what says what its columns hold, which is kept by then. */
  readonly name: (db: Kysely<Tables>) => Promise<string>;
  readonly firstTick: number;
  readonly ticks: number;
  readonly channels: number;
  readonly numbers: Float64Array;
  /** As in the spans table. */
  readonly coarseness: Uint8Array | null;
  readonly corrections: readonly Correction[];
  readonly readings: number;
  readonly endState: Uint8Array;
  readonly residuals: (segment: number) => ReturnType<typeof residualRows>;
}

/** The decoding side of one store. */
export class Chain {
  readonly #store: Store;
  readonly #shelf: Shelf;

  constructor(store: Store, shelf: Shelf) {
    this.#store = store;
    this.#shelf = shelf;
  }

  /** Decodes the segment at `place` if it can be, then its successors as far as the chain reaches. */
  async follow(place: StreamPlace): Promise<ChainEvent[]> {
    const events: ChainEvent[] = [];
    for (let number = place.number; ; number++) {
      const row = await this.find({ ...place, number });
      if (row === undefined || row.state !== 'waiting') break;
      if (number > place.number && row.keyed === 1) break;
      const event = await this.#attempt(row);
      events.push(event);
      if (event.kind === 'waiting') break;
    }
    return events;
  }

  /**
   * Tries everything that waits: at start, and when bundles have come. What the store throws at one segment goes into
   * `failures`, and the others are still tried; without such a list it is thrown on.
   */
  async followAll(bundles: readonly string[] | null = null, failures: Error[] | null = null): Promise<ChainEvent[]> {
    let query = this.#store.db
      .selectFrom('segments')
      .select(['site', 'gateway', 'stream', 'number'])
      .where('state', '=', 'waiting');
    if (bundles !== null) query = query.where('bundle', 'in', [...bundles]);
    const places = await query.orderBy('site').orderBy('gateway').orderBy('stream').orderBy('number').execute();
    const events: ChainEvent[] = [];
    for (const place of places) {
      try {
        events.push(...(await this.follow(place)));
      } catch (error) {
        if (failures === null) throw error;
        failures.push(error as Error);
      }
    }
    return events;
  }

  /** The kept segment at a place, or undefined. */
  find(place: StreamPlace) {
    return this.#store.db
      .selectFrom('segments')
      .select([
        'id',
        'site',
        'gateway',
        'stream',
        'number',
        'bundle',
        'keyed',
        'state',
        'reason',
        'bytes',
        'size',
        'end_state',
      ])
      .where('site', '=', place.site)
      .where('gateway', '=', place.gateway)
      .where('stream', '=', place.stream)
      .where('number', '=', place.number)
      .executeTakeFirst();
  }

  async #attempt(row: NonNullable<Row>): Promise<ChainEvent> {
    const shelved = isWithoutBundle(row.bundle) ? null : await this.#shelf.find(row.bundle);
    if (shelved === null && !isWithoutBundle(row.bundle)) return this.#wait(row, 'bundle');
    let before: NonNullable<Row> | undefined;
    if (row.keyed === 0) {
      before = await this.find({ ...row, number: row.number - 1 });
      if (before === undefined || before.state === 'waiting') return this.#wait(row, 'predecessor');
      const broken = breakBefore(row, before);
      if (broken !== null) return this.#break(row, broken);
    }
    let decoded: Decoded;
    try {
      const start = before?.end_state ? toBytes(before.end_state) : null;
      const bytes = toBytes(row.bytes);
      decoded =
        shelved === null
          ? fromPlain(replayPlain(bytes, start), row.site)
          : fromBundle(replaySegment(bytes, shelved.model, start), shelved.digest);
    } catch (error) {
      return this.#break(row, (error as Error).message);
    }
    await this.#commit(row, decoded);
    return { ...said(row), kind: 'decoded', readings: decoded.readings, reason: null };
  }

  async #wait(row: NonNullable<Row>, reason: string): Promise<ChainEvent> {
    if (row.reason !== reason) {
      await this.#store.db.updateTable('segments').set({ reason }).where('id', '=', row.id).execute();
    }
    return { ...said(row), kind: 'waiting', readings: null, reason };
  }

  async #break(row: NonNullable<Row>, reason: string): Promise<ChainEvent> {
    await this.#store.db.updateTable('segments').set({ state: 'broken', reason }).where('id', '=', row.id).execute();
    return { ...said(row), kind: 'broken', readings: null, reason };
  }

  async #commit(row: NonNullable<Row>, decoded: Decoded): Promise<void> {
    await this.#store.db.transaction().execute(async (db) => {
      const common = { segment: row.id, site: row.site, bundle: await decoded.name(db) };
      const corrections = decoded.corrections.map(({ tick, channel, index }, entry) => ({
        ...common,
        entry,
        tick,
        channel,
        lattice: index,
      }));
      await db
        .updateTable('segments')
        .set({ state: 'decoded', reason: null, readings: decoded.readings, end_state: decoded.endState })
        .where('id', '=', row.id)
        .execute();
      const { firstTick: first_tick, ticks, channels, coarseness } = decoded;
      await db
        .insertInto('spans')
        .values({ ...common, first_tick, ticks, channels, lattice: packNumbers(decoded.numbers), coarseness })
        .execute();
      for (let at = 0; at < corrections.length; at += 500) {
        await db
          .insertInto('corrections')
          .values(corrections.slice(at, at + 500))
          .execute();
      }
      const residuals = decoded.residuals(row.id);
      if (residuals.length > 0) await db.insertInto('residuals').values(residuals).execute();
      // The state before this segment is needed no more.
      await db
        .updateTable('segments')
        .set({ end_state: null })
        .where('site', '=', row.site)
        .where('gateway', '=', row.gateway)
        .where('stream', '=', row.stream)
        .where('number', '=', row.number - 1)
        .execute();
    });
  }
}

function breakBefore(row: NonNullable<Row>, before: NonNullable<Row>): string | null {
  if (before.state === 'broken')
    return `follows segment ${before.number}, which is broken; goes on at the next keyed segment`;
  if (before.bundle !== row.bundle) return `chained to segment ${before.number}, which was made with another bundle`;
  return null;
}

function residualRows(segment: number, replay: Replay) {
  return Array.from(replay.residualCount, (count, channel) => ({
    segment,
    channel,
    count,
    sum: replay.residualSum[channel]!,
    square_sum: replay.residualSquareSum[channel]!,
  }));
}

function fromBundle(replay: Replay, digest: string): Decoded {
  const { firstTick, ticks, channelCount: channels } = replay.head;
  const coarseness = replay.head.coarseness.some((power) => power > 0) ? replay.head.coarseness : null;
  const residuals = (segment: number): ReturnType<typeof residualRows> => residualRows(segment, replay);
  const numbers = replay.lattice;
  return { ...replay, name: async () => digest, firstTick, ticks, channels, numbers, coarseness, residuals };
}

function fromPlain(replay: PlainReplay, site: string): Decoded {
  const numbers = new Float64Array(replay.lattice.length + replay.off.length);
  numbers.set(replay.lattice);
  numbers.set(replay.off, replay.lattice.length);
  const channels = replay.layout.channels.length;
  const name = (db: Kysely<Tables>): Promise<string> => keepLayout(db, site, replay.layout);
  return { ...replay, name, channels, numbers, coarseness: null, residuals: () => [] };
}

/** Deflated float64 little-endian. */
function packNumbers(numbers: Float64Array): Uint8Array {
  const bytes = new Uint8Array(numbers.length * 8);
  const view = new DataView(bytes.buffer);
  for (let i = 0; i < numbers.length; i++) view.setFloat64(i * 8, numbers[i]!, true);
  return deflateRawSync(bytes, { level: 6 });
}

function said(row: NonNullable<Row>): Omit<ChainEvent, 'kind' | 'readings' | 'reason'> {
  return { site: row.site, gateway: row.gateway, stream: row.stream, number: row.number, size: row.size };
}
