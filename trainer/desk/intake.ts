/**
 * Takes segments in: checks the bytes, commits them, and says for each what became of it. Only what is committed here
 * may be receipted, since a receipt makes the gateway delete its copy. Decoding is a later step of its own (chain.ts):
 * a segment is safe as soon as its bytes are, whether or not they can be read yet.
 */
import { isName, NAME_RULE, readSegmentHead, segmentHash } from '@stillwell/protocol';
import type { Transaction } from 'kysely';
import type { Store } from './store/open.ts';
import { toBytes } from './store/open.ts';
import type { Tables } from './store/schema.ts';

/** One message on a segments topic. */
export interface Arrival {
  /** Site named by the topic; a segment that names another is refused. */
  readonly site: string;
  readonly bytes: Uint8Array;
  readonly atMs: number;
}

/** What a receipt must name. */
export interface SegmentName {
  readonly site: string;
  readonly gateway: string;
  /** Hex, 16 digits. */
  readonly stream: string;
  readonly number: number;
  readonly hash: Uint8Array;
}

/**
 * stored    new, committed
 * copy      the same bytes as a kept one, counted
 * conflict  same number, other bytes: committed aside and flagged; `name` carries the hash of the kept one, so that the
 *           receipt tells the gateway that the desk holds something else under this number
 * refused   damaged or of another site: counted, never receipted
 */
export type Outcome =
  | {
      readonly kind: 'stored' | 'copy' | 'conflict';
      readonly name: SegmentName;
      readonly ticks: number;
      readonly size: number;
    }
  | { readonly kind: 'refused'; readonly site: string; readonly cause: string; readonly message: string };

/**
 * Commits a batch in one transaction; the outcomes stand in the order of the arrivals.
 *
 * throws  what the store throws (disk full, file damaged): then nothing of the batch is committed
 */
export async function takeIn(store: Store, arrivals: readonly Arrival[]): Promise<Outcome[]> {
  const checked = arrivals.map((arrival) => ({ arrival, checked: check(arrival) }));
  return store.db.transaction().execute(async (transaction) => {
    const outcomes: Outcome[] = [];
    for (const { arrival, checked: segment } of checked) {
      if ('cause' in segment) {
        await countRefusal(transaction, arrival, segment);
        outcomes.push({ kind: 'refused', site: arrival.site, ...segment });
      } else {
        outcomes.push(await keep(transaction, arrival, segment));
      }
    }
    return outcomes;
  });
}

interface Checked {
  readonly name: SegmentName;
  readonly bundle: string;
  readonly firstTick: number;
  readonly ticks: number;
  readonly keyed: boolean;
}

interface Refusal {
  readonly cause: string;
  readonly message: string;
}

function check(arrival: Arrival): Checked | Refusal {
  try {
    const head = readSegmentHead(arrival.bytes);
    if (head.site !== arrival.site) {
      return {
        cause: 'site',
        message: `segment of site "${head.site}" came on the topic of site "${arrival.site}"; see which client may publish there`,
      };
    }
    if (!isName(head.gateway)) {
      return {
        cause: 'gateway',
        message: `segment of a gateway named ${JSON.stringify(head.gateway)}: expected ${NAME_RULE}`,
      };
    }
    const stream = Buffer.from(head.stream).toString('hex');
    const { site, gateway, number, firstTick, ticks } = head;
    const name = { site, gateway, stream, number, hash: segmentHash(arrival.bytes) };
    return { name, bundle: Buffer.from(head.bundle).toString('hex'), firstTick, ticks, keyed: head.start === 'keyed' };
  } catch (error) {
    return { cause: 'damaged', message: (error as Error).message };
  }
}

async function keep(db: Transaction<Tables>, arrival: Arrival, segment: Checked): Promise<Outcome> {
  const { site, gateway, stream, number, hash } = segment.name;
  const said = { name: segment.name, ticks: segment.ticks, size: arrival.bytes.length };
  const kept = await db
    .selectFrom('segments')
    .select(['id', 'hash', 'copies'])
    .where('site', '=', site)
    .where('gateway', '=', gateway)
    .where('stream', '=', stream)
    .where('number', '=', number)
    .executeTakeFirst();
  if (kept && Buffer.compare(toBytes(kept.hash), hash) === 0) {
    await db
      .updateTable('segments')
      .set({ copies: kept.copies + 1, last_ms: arrival.atMs })
      .where('id', '=', kept.id)
      .execute();
    return { kind: 'copy', ...said };
  }
  if (kept) {
    const row = { site, gateway, stream, number, hash, bytes: arrival.bytes, received_ms: arrival.atMs };
    await db
      .insertInto('conflicts')
      .values(row)
      .onConflict((conflict) => conflict.doNothing())
      .execute();
    return { kind: 'conflict', ...said, name: { ...segment.name, hash: toBytes(kept.hash) } };
  }
  await db.insertInto('segments').values(newRow(segment, arrival)).execute();
  return { kind: 'stored', ...said };
}

function newRow(segment: Checked, arrival: Arrival) {
  return {
    ...segment.name,
    bundle: segment.bundle,
    first_tick: segment.firstTick,
    ticks: segment.ticks,
    keyed: segment.keyed ? 1 : 0,
    bytes: arrival.bytes,
    size: arrival.bytes.length,
    received_ms: arrival.atMs,
    last_ms: arrival.atMs,
    copies: 0,
    receipted: 0,
    state: 'waiting' as const,
    reason: null,
    readings: null,
    end_state: null,
  };
}

async function countRefusal(db: Transaction<Tables>, arrival: Arrival, refusal: Refusal): Promise<void> {
  const { site, atMs } = arrival;
  await db
    .insertInto('refusals')
    .values({ site, cause: refusal.cause, count: 1, last_ms: atMs, message: refusal.message })
    .onConflict((conflict) =>
      conflict.columns(['site', 'cause']).doUpdateSet((row) => ({
        count: row('refusals.count', '+', 1),
        last_ms: atMs,
        message: refusal.message,
      })),
    )
    .execute();
}
