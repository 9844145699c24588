/**
 * The desk at work: segments come in, are committed in batches, receipted, decoded. Joined to MQTT by two functions the
 * caller gives, so that the same code runs against a broker and inside a test. An arrival that cannot be kept just now
 * (queue full, disk full) is dropped without a receipt: the gateway still has it and sends it again.
 */
import { MAX_RECEIPT_SEGMENTS, parseTopic, receiptMessage, topicsOf } from '@stillwell/protocol';
import { Chain, type ChainEvent } from './chain.ts';
import { type Arrival, type Outcome, type SegmentName, takeIn } from './intake.ts';
import type { Shelf } from './shelf.ts';
import { type Store, toBytes } from './store/open.ts';

/** What a desk tells as it goes: one JSON line each under `--json`. */
export type DeskEvent =
  | (Outcome & { readonly event: 'segment' })
  | (ChainEvent & { readonly event: 'chain' })
  | { readonly event: 'receipt'; readonly site: string; readonly gateway: string; readonly segments: number }
  | { readonly event: 'receipt-lost'; readonly site: string; readonly message: string }
  | { readonly event: 'bundle'; readonly digest: string }
  | { readonly event: 'bundle-refused'; readonly file: string; readonly message: string }
  | { readonly event: 'not-kept'; readonly dropped: number; readonly message: string }
  | { readonly event: 'failed'; readonly message: string };

/** What a collector is joined to. */
export interface CollectorOptions {
  readonly store: Store;
  readonly shelf: Shelf;
  readonly root: string;
  /** Publishes a receipt, QoS 1; a rejection means "unknown" and is only told. */
  readonly publish: (topic: string, payload: Uint8Array) => Promise<void>;
  readonly onEvent: (event: DeskEvent) => void;
  readonly now?: () => number;
}

/** Segments committed in one transaction at most. */
const BATCH = 64;
/** Bytes waiting in memory at most; beyond, arrivals are left to the gateways. */
const MAX_QUEUE_BYTES = 64 * 1024 * 1024;
/** What an arrival takes in memory beside its bytes, about: a flood of empty messages must meet the limit too. */
const ARRIVAL_BYTES = 512;
/** So long after a batch nothing is decoded: a round trip later the next one may be here. */
const LULL_MS = 100;
/** After a failed decoding, the store is given so long before all that waits is tried again. */
const RETRY_MS = 60_000;

/** Takes messages in one after the other, whatever their rate. */
export class Collector {
  readonly #options: CollectorOptions;
  readonly #chain: Chain;
  readonly #now: () => number;
  #queue: Arrival[] = [];
  #queueBytes = 0;
  #dropped = 0;
  /** Committed and receipted, to be decoded when nothing is left to commit. */
  #undecoded: SegmentName[] = [];
  /** When all that waits is to be tried again; null while nothing has failed. */
  #retryAtMs: number | null = null;
  /** Receipts that went out and are not marked so in the store yet. */
  readonly #receipted: SegmentName[] = [];
  /** The pump at work, or the last one done; never rejects. */
  #pump: Promise<void> = Promise.resolve();
  #isPumping = false;

  constructor(options: CollectorOptions) {
    this.#options = options;
    this.#chain = new Chain(options.store, options.shelf);
    this.#now = options.now ?? Date.now;
  }

  /** Arrivals not committed yet. */
  get waiting(): number {
    return this.#queue.length;
  }

  /** Takes one message; false where its topic carries no segments. Returns at once and never throws. */
  offer(topic: string, payload: Uint8Array): boolean {
    const parsed = parseTopic(this.#options.root, topic);
    if (parsed?.kind !== 'segments') return false;
    const cost = payload.length + ARRIVAL_BYTES;
    if (this.#queueBytes + cost > MAX_QUEUE_BYTES) {
      this.#dropped++;
      return true;
    }
    this.#queue.push({ site: parsed.site, bytes: Uint8Array.from(payload), atMs: this.#now() });
    this.#queueBytes += cost;
    this.#start();
    return true;
  }

  /**
   * Looks through the bundle folder and decodes what waited for what it finds; at start, and a while after a failure, also
   * all else that waits.
   */
  refresh(isStart = false): Promise<void> {
    const look = async (): Promise<void> => {
      await this.#markReceipted();
      const { added, refused } = await this.#options.shelf.refresh();
      for (const digest of added) this.#tell({ event: 'bundle', digest });
      for (const one of refused) this.#tell({ event: 'bundle-refused', ...one });
      if (isStart || (this.#retryAtMs !== null && this.#now() >= this.#retryAtMs)) await this.#decodeWaiting(null);
      else if (added.length > 0) await this.#decodeWaiting(added);
    };
    this.#pump = this.#pump.then(look).catch((error: Error) => this.#failed(error));
    return this.#pump;
  }

  /** Gives the receipts that an earlier run could not: killed after the commit, or the link was down. */
  async repeatReceipts(): Promise<void> {
    const rows = await this.#options.store.db
      .selectFrom('segments')
      .select(['site', 'gateway', 'stream', 'number', 'hash'])
      .where('receipted', '=', 0)
      .orderBy('number')
      .execute();
    await this.#receipt(rows.map((row) => ({ ...row, hash: toBytes(row.hash) })));
  }

  /** Resolves when everything taken so far is committed, receipted and, as far as possible, decoded. */
  async settle(): Promise<void> {
    do await this.#pump;
    while (this.#isPumping || this.#queue.length > 0);
    await this.#markReceipted();
  }

  #start(): void {
    if (this.#isPumping) return;
    this.#isPumping = true;
    this.#pump = this.#pump.then(async () => {
      // Receipts first: a gateway that drains an outage waits for them, and decoding writes for each segment.
      let isLull = false;
      while (this.#queue.length > 0 || this.#undecoded.length > 0) {
        if (this.#queue.length > 0) {
          await this.#takeBatch();
          isLull = false;
        } else if (isLull) {
          await this.#decode(this.#undecoded.shift()!);
        } else {
          await new Promise((resolve) => setTimeout(resolve, LULL_MS));
          isLull = true;
        }
      }
      this.#isPumping = false;
    });
  }

  async #takeBatch(): Promise<void> {
    const batch = this.#queue.splice(0, BATCH);
    for (const { bytes } of batch) this.#queueBytes -= bytes.length + ARRIVAL_BYTES;
    let outcomes: Outcome[] = [];
    try {
      outcomes = await takeIn(this.#options.store, batch);
    } catch (error) {
      this.#tell({ event: 'not-kept', dropped: batch.length, message: (error as Error).message });
    }
    for (const outcome of outcomes) this.#tell({ event: 'segment', ...outcome });
    for (const outcome of outcomes) if (outcome.kind === 'stored') this.#undecoded.push(outcome.name);
    await this.#receipt(outcomes.flatMap((outcome) => (outcome.kind === 'refused' ? [] : [outcome.name])));
    if (this.#dropped > 0) {
      this.#tell({
        event: 'not-kept',
        dropped: this.#dropped,
        message: 'too much at once; the gateways send it again',
      });
    }
    this.#dropped = 0;
  }

  /** One message for each gateway and stream; only what is committed is named. */
  async #receipt(committed: readonly SegmentName[]): Promise<void> {
    const groups = new Map<string, SegmentName[]>();
    for (const name of committed) {
      const key = JSON.stringify([name.site, name.gateway, name.stream]);
      const group = groups.get(key);
      if (group) group.push(name);
      else groups.set(key, [name]);
    }
    const sent = [...groups.values()].flatMap((names) => {
      const messages: Promise<void>[] = [];
      for (let at = 0; at < names.length; at += MAX_RECEIPT_SEGMENTS) {
        messages.push(this.#send(names.slice(at, at + MAX_RECEIPT_SEGMENTS)));
      }
      return messages;
    });
    await Promise.all(sent);
  }

  async #send(names: readonly SegmentName[]): Promise<void> {
    const { site, gateway, stream } = names[0]!;
    const segments = names.map(({ number, hash }) => ({ number, hash }));
    try {
      const payload = receiptMessage({ site, gateway, stream: Uint8Array.from(Buffer.from(stream, 'hex')), segments });
      await this.#options.publish(topicsOf(this.#options.root, site).receipts, payload);
      this.#receipted.push(...names);
      this.#tell({ event: 'receipt', site, gateway, segments: segments.length });
    } catch (error) {
      this.#tell({ event: 'receipt-lost', site, message: (error as Error).message });
    }
  }

  /** Remembers which receipts went out. Late is early enough: a receipt given twice does no harm. */
  async #markReceipted(): Promise<void> {
    const names = this.#receipted.splice(0);
    if (names.length === 0) return;
    await this.#options.store.db.transaction().execute(async (db) => {
      for (const { site, gateway, stream, number } of names) {
        await db
          .updateTable('segments')
          .set({ receipted: 1 })
          .where('site', '=', site)
          .where('gateway', '=', gateway)
          .where('stream', '=', stream)
          .where('number', '=', number)
          .execute();
      }
    });
  }

  async #decode(name: SegmentName): Promise<void> {
    try {
      this.#tellChain(await this.#chain.follow(name));
    } catch (error) {
      this.#failed(error as Error);
    }
  }

  /** One segment that fails must not keep the others of the fleet waiting. */
  async #decodeWaiting(bundles: readonly string[] | null): Promise<void> {
    if (bundles === null) this.#retryAtMs = null;
    const failures: Error[] = [];
    this.#tellChain(await this.#chain.followAll(bundles, failures));
    if (failures.length > 0) this.#failed(failures[0]!);
  }

  #tellChain(events: readonly ChainEvent[]): void {
    for (const event of events) this.#tell({ event: 'chain', ...event });
  }

  /** What is committed stays so; it is tried again after a while, and at the next start. */
  #failed(error: Error): void {
    this.#retryAtMs ??= this.#now() + RETRY_MS;
    this.#tell({ event: 'failed', message: error.message });
  }

  #tell(event: DeskEvent): void {
    this.#options.onEvent(event);
  }
}
