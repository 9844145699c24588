/**
 * Opens the desk's embedded store: one SQL file in write-ahead mode with full synchronisation, since a receipt makes the
 * gateway delete its copy and so must never leave before the commit has reached the disk.
 */
import { existsSync } from 'node:fs';
import { join } from 'node:path';
import { makeFolder } from '@stillwell/runtime/files';
import { Kysely, type SqliteDatabase, SqliteDialect } from 'kysely';
import Database from 'libsql';
import { TrainError } from '../../errors.ts';
import { unwritable } from '../../output-file.ts';
import { lockFolder } from './lock.ts';
import { SCHEMA_STEPS, type Tables } from './schema.ts';

/** File of the store inside the desk's data folder. */
export const STORE_FILE = 'desk.db';

/** Where a gateway keeps who it is: its folder is not for a desk, though both could write there. */
const GATEWAY_FILE = 'identity.json';

/** An open store; `close` also gives the folder back. */
export interface Store {
  readonly db: Kysely<Tables>;
  readonly folder: string;
  close(): Promise<void>;
}

/**
 * Opens a store for collecting, making folder and tables where missing. One process at a time: a second one is refused.
 *
 * throws  TrainError 'archive' when another desk holds the folder, a gateway's data stand in it, the
 *         file is no store, or a newer program wrote it
 */
export async function openStore(folder: string): Promise<Store> {
  try {
    makeFolder(folder);
  } catch (cause) {
    throw unwritable(folder, cause as Error);
  }
  if (existsSync(join(folder, GATEWAY_FILE))) {
    throw new TrainError(
      'archive',
      `${folder}: expected the data folder of a desk, got a gateway's (with ${GATEWAY_FILE} inside); give another with --data`,
    );
  }
  const unlock = lockFolder(folder);
  try {
    const store = await connect(folder);
    return {
      ...store,
      close: async () => {
        await store.close();
        unlock();
      },
    };
  } catch (error) {
    unlock();
    throw error;
  }
}

/**
 * Opens a store that must exist already, to look at or to read from while a desk may be writing to it.
 *
 * throws  TrainError 'archive' when there is none in `folder`, or it cannot be read
 */
export async function openArchive(folder: string): Promise<Store> {
  if (!existsSync(join(folder, STORE_FILE))) {
    throw new TrainError(
      'archive',
      `${folder}: expected the data folder of a desk (with ${STORE_FILE} inside), found none; give the folder that ` +
        '`stillwell desk --data` writes to',
    );
  }
  return connect(folder);
}

async function connect(folder: string): Promise<Store> {
  const path = join(folder, STORE_FILE);
  let db: Kysely<Tables> | null = null;
  try {
    const file = new Database(path, { timeout: 5000 });
    file.pragma('journal_mode = WAL');
    file.pragma('synchronous = FULL');
    file.pragma('busy_timeout = 5000');
    const kysely = new Kysely<Tables>({ dialect: new SqliteDialect({ database: file as unknown as SqliteDatabase }) });
    db = kysely;
    await migrate(kysely, path);
    return { db: kysely, folder, close: () => kysely.destroy() };
  } catch (cause) {
    await db?.destroy().catch(() => undefined);
    if (cause instanceof TrainError) throw cause;
    throw new TrainError(
      'archive',
      `${path}: cannot be opened as a desk's store (${(cause as Error).message}); restore it from a copy, or move it ` +
        'away and let the gateways send again what is not receipted',
      { cause },
    );
  }
}

async function migrate(db: Kysely<Tables>, path: string): Promise<void> {
  await db.schema
    .createTable('meta')
    .ifNotExists()
    .addColumn('key', 'text', (column) => column.primaryKey())
    .addColumn('value', 'text', (column) => column.notNull())
    .execute();
  const version = Number((await readMeta(db, 'schema')) ?? '0');
  if (version > SCHEMA_STEPS.length) {
    throw new TrainError(
      'archive',
      `${path}: written by a newer program (store version ${version}, this program knows ${SCHEMA_STEPS.length}); ` +
        'update the desk',
    );
  }
  for (let step = version; step < SCHEMA_STEPS.length; step++) {
    await db.transaction().execute(async (transaction) => {
      await SCHEMA_STEPS[step]!(transaction);
      await writeMeta(transaction, 'schema', String(step + 1));
    });
  }
}

/** One kept value, or null. */
export async function readMeta(db: Kysely<Tables>, key: string): Promise<string | null> {
  const row = await db.selectFrom('meta').select('value').where('key', '=', key).executeTakeFirst();
  return row?.value ?? null;
}

/** Keeps one value under `key`, replacing an older one. */
export async function writeMeta(db: Kysely<Tables>, key: string, value: string): Promise<void> {
  await db
    .insertInto('meta')
    .values({ key, value })
    .onConflict((conflict) => conflict.column('key').doUpdateSet({ value }))
    .execute();
}

/** A blob as the engine gave it, as bytes. */
export function toBytes(blob: ArrayBuffer | Uint8Array): Uint8Array {
  return new Uint8Array(blob);
}
