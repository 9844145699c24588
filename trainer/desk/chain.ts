/**
 * Decodes what has been taken in, in the order the chain of states allows: a keyed segment any time, a chained one after
 * its predecessor. Each decoded segment is one transaction; what cannot be decoded yet stays safe and waits. A break is
 * recorded with its reason and ends at the next keyed segment.
 */
import { deflateRawSync } from 'node:zlib';
import { type Replay, replaySegment } from './replay.ts';
import type { Shelf, ShelvedBundle } from './shelf.ts';
import { type Store, toBytes } from './store/open.ts';

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
    const shelved = await this.#shelf.find(row.bundle);
    if (shelved === null) return this.#wait(row, 'bundle');
    let before: NonNullable<Row> | undefined;
    if (row.keyed === 0) {
      before = await this.find({ ...row, number: row.number - 1 });
      if (before === undefined || before.state === 'waiting') return this.#wait(row, 'predecessor');
      const broken = breakBefore(row, before);
      if (broken !== null) return this.#break(row, broken);
    }
    let replay: Replay;
    try {
      replay = replaySegment(toBytes(row.bytes), shelved.model, before?.end_state ? toBytes(before.end_state) : null);
    } catch (error) {
      return this.#break(row, (error as Error).message);
    }
    await this.#commit(row, shelved, replay);
    return { ...said(row), kind: 'decoded', readings: replay.readings, reason: null };
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

  async #commit(row: NonNullable<Row>, shelved: ShelvedBundle, replay: Replay): Promise<void> {
    const { head } = replay;
    const common = { segment: row.id, site: row.site, bundle: shelved.digest };
    const corrections = replay.corrections.map(({ tick, channel, index }, entry) => ({
      ...common,
      entry,
      tick,
      channel,
      lattice: index,
    }));
    await this.#store.db.transaction().execute(async (db) => {
      await db
        .updateTable('segments')
        .set({ state: 'decoded', reason: null, readings: replay.readings, end_state: replay.endState })
        .where('id', '=', row.id)
        .execute();
      const lattice = packLattice(replay.lattice);
      const { firstTick: first_tick, ticks, channelCount: channels } = head;
      await db
        .insertInto('spans')
        .values({ ...common, first_tick, ticks, channels, lattice })
        .execute();
      for (let at = 0; at < corrections.length; at += 500) {
        await db
          .insertInto('corrections')
          .values(corrections.slice(at, at + 500))
          .execute();
      }
      await db.insertInto('residuals').values(residualRows(row.id, replay)).execute();
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

/** Deflated float64 little-endian. */
function packLattice(lattice: Float64Array): Uint8Array {
  const bytes = new Uint8Array(lattice.length * 8);
  const view = new DataView(bytes.buffer);
  for (let i = 0; i < lattice.length; i++) view.setFloat64(i * 8, lattice[i]!, true);
  return deflateRawSync(bytes, { level: 6 });
}

function said(row: NonNullable<Row>): Omit<ChainEvent, 'kind' | 'readings' | 'reason'> {
  return { site: row.site, gateway: row.gateway, stream: row.stream, number: row.number, size: row.size };
}
