/**
 * Bundles by digest, for replaying segments. They come from a folder that is looked through again and again, and stay in
 * the store, so that the archive can be read without the folder. A segment names its bundle by SHA-256 of the document, so
 * nothing but that very document can be taken for it.
 */
import { readdirSync, readFileSync, statSync } from 'node:fs';
import { join } from 'node:path';
import { type Bundle, bundleDigest, decodeBundle } from '@stillwell/protocol';
import { checkModel, type Model, modelFromBundle } from '@stillwell/runtime/filter';
import { documentOf } from '../bundle-file.ts';
import { type Store, toBytes } from './store/open.ts';

/** A bundle ready to replay with. */
export interface ShelvedBundle {
  readonly digest: string;
  readonly bundle: Bundle;
  readonly model: Model;
}

/** What a look through the folder found. */
export interface ShelfNews {
  readonly added: readonly string[];
  readonly refused: readonly { readonly file: string; readonly message: string }[];
}

/** Bundles of one store; keeps the dequantised models in memory. */
export class Shelf {
  readonly #store: Store;
  readonly #folder: string | null;
  readonly #now: () => number;
  readonly #models = new Map<string, ShelvedBundle>();
  /** Files read before, with what they looked like then. */
  readonly #seen = new Map<string, string>();

  constructor(store: Store, folder: string | null, now: () => number = Date.now) {
    this.#store = store;
    this.#folder = folder;
    this.#now = now;
  }

  /**
   * Reads new and changed files of the folder into the store; a file that is no bundle is named once and passed over.
   *
   * throws  what the store throws (disk full, busy): the files are read again at the next look
   */
  async refresh(): Promise<ShelfNews> {
    const added: string[] = [];
    const refused: { file: string; message: string }[] = [];
    for (const file of this.#newFiles()) {
      let document: Uint8Array;
      let shelved: ShelvedBundle;
      try {
        document = documentOf(readFileSync(file), file).bytes;
        shelved = open(document);
      } catch (error) {
        refused.push({ file, message: (error as Error).message });
        continue;
      }
      try {
        if (await this.#keep(shelved, document)) added.push(shelved.digest);
      } catch (error) {
        // The store's fault, not the file's: every file is looked at again, since those before it are kept already.
        this.#seen.clear();
        throw error;
      }
    }
    return { added, refused };
  }

  /** The bundle of this digest, or null while it is unknown. */
  async find(digest: string): Promise<ShelvedBundle | null> {
    const known = this.#models.get(digest);
    if (known) return known;
    const row = await this.#store.db
      .selectFrom('bundles')
      .select('document')
      .where('digest', '=', digest)
      .executeTakeFirst();
    if (!row) return null;
    const shelved = open(toBytes(row.document));
    this.#models.set(digest, shelved);
    return shelved;
  }

  #newFiles(): string[] {
    if (this.#folder === null) return [];
    const folder = this.#folder;
    const files = readdirSync(folder)
      .filter((name) => name.endsWith('.swb') || name.endsWith('.swc'))
      .map((name) => join(folder, name))
      .sort();
    return files.filter((file) => {
      const { mtimeMs, size, isFile } = look(file);
      const face = `${mtimeMs} ${size}`;
      if (!isFile || this.#seen.get(file) === face) return false;
      this.#seen.set(file, face);
      return true;
    });
  }

  async #keep(shelved: ShelvedBundle, document: Uint8Array): Promise<boolean> {
    const result = await this.#store.db
      .insertInto('bundles')
      .values({ digest: shelved.digest, site: shelved.bundle.site, document, added_ms: this.#now() })
      .onConflict((conflict) => conflict.doNothing())
      .executeTakeFirst();
    this.#models.set(shelved.digest, shelved);
    return (result.numInsertedOrUpdatedRows ?? 0n) > 0n;
  }
}

function open(document: Uint8Array): ShelvedBundle {
  const bundle = decodeBundle(document);
  const model = modelFromBundle(bundle);
  checkModel(model);
  return { digest: Buffer.from(bundleDigest(document)).toString('hex'), bundle, model };
}

/** A file may vanish between listing and looking. */
function look(file: string): { mtimeMs: number; size: number; isFile: boolean } {
  const stat = statSync(file, { throwIfNoEntry: false });
  return { mtimeMs: stat?.mtimeMs ?? 0, size: stat?.size ?? 0, isFile: stat?.isFile() ?? false };
}
