/**
 * What the columns of an archive's spans hold: said by the bundle that a segment was made with, or, where there was none, by
 * the segment itself. The latter are kept beside the bundles, by digest.
 */
import { decodeLayout, encodeLayout, type Layout, layoutDigest, toHex } from '@stillwell/protocol';
import type { Kysely } from 'kysely';
import { Shelf } from './shelf.ts';
import { type Store, toBytes } from './store/open.ts';
import type { Tables } from './store/schema.ts';

/** A layout, and whether a bundle said so. */
export interface KnownLayout {
  readonly layout: Layout;
  readonly isOfBundle: boolean;
}

/** Keeps the layout of a segment that says its own; its digest in hex. */
export async function keepLayout(db: Kysely<Tables>, site: string, layout: Layout): Promise<string> {
  const digest = toHex(layoutDigest(layout));
  await db
    .insertInto('layouts')
    .values({ digest, site, document: encodeLayout(layout) })
    .onConflict((conflict) => conflict.doNothing())
    .execute();
  return digest;
}

/** Layouts of one store by the digests that its spans name. */
export class Layouts {
  readonly #store: Store;
  readonly #shelf: Shelf;

  constructor(store: Store, shelf: Shelf = new Shelf(store, null)) {
    this.#store = store;
    this.#shelf = shelf;
  }

  /** Null where neither a bundle nor a segment has this digest. */
  async find(digest: string): Promise<KnownLayout | null> {
    const shelved = await this.#shelf.find(digest);
    if (shelved !== null) return { layout: shelved.bundle, isOfBundle: true };
    const row = await this.#store.db
      .selectFrom('layouts')
      .select('document')
      .where('digest', '=', digest)
      .executeTakeFirst();
    return row === undefined ? null : { layout: decodeLayout(toBytes(row.document)), isOfBundle: false };
  }
}
