/**
 * The tables of the desk's store and how each version of them is reached from the one before.
 *
 * Only what the query layer and every SQL engine behind it share is used (integer, text, blob, real), so that the same
 * queries serve an embedded file and a server.
 */
import { type ColumnType, type Generated, type Kysely, sql } from 'kysely';

/** Written as bytes; the embedded engine hands blobs back as ArrayBuffer, a server as Buffer: read with `toBytes`. */
type Blob = ColumnType<ArrayBuffer | Uint8Array, Uint8Array, Uint8Array>;
type NullableBlob = ColumnType<ArrayBuffer | Uint8Array | null, Uint8Array | null, Uint8Array | null>;

/** One value a key: what must outlive the process beside the segments (client id of the desk, schema version). */
export interface MetaTable {
  key: string;
  value: string;
}

/**
 * Every segment received, whether decoded yet or not.
 *
 * state      'waiting' (for its bundle or for its predecessor), 'decoded' or 'broken'; `reason` says why in words
 * end_state  filter state after the last tick, kept only until the successor is decoded
 * copies     how often the same bytes came again
 * receipted  1 once the broker took the receipt; others get it at the next start
 */
export interface SegmentTable {
  id: Generated<number>;
  site: string;
  gateway: string;
  stream: string;
  number: number;
  hash: Blob;
  bundle: string;
  first_tick: number;
  ticks: number;
  keyed: number;
  bytes: Blob;
  size: number;
  received_ms: number;
  last_ms: number;
  copies: number;
  receipted: number;
  state: 'waiting' | 'decoded' | 'broken';
  reason: string | null;
  readings: number | null;
  end_state: NullableBlob;
}

/** Same gateway, stream and number as a kept segment, but other bytes: set aside, never merged. */
export interface ConflictTable {
  site: string;
  gateway: string;
  stream: string;
  number: number;
  hash: Blob;
  bytes: Blob;
  received_ms: number;
}

/**
 * Lattice numbers of a decoded segment: deflated float64 little-endian, tick by tick, NaN where missing; behind them, of a
 * segment without a bundle, pairs of place and reading for what lay off the lattice. `bundle` is the digest of the bundle,
 * or else of the layout that the segment says.
 *
 * coarseness  a byte k a channel: its numbers are multiples of 2^k; null where all came as the sensors said them
 */
export interface SpanTable {
  segment: number;
  site: string;
  bundle: string;
  first_tick: number;
  ticks: number;
  channels: number;
  lattice: Blob;
  coarseness: NullableBlob;
}

/** A reading that came after its tick was closed, beside what the filter saw. */
export interface CorrectionTable {
  segment: number;
  entry: number;
  site: string;
  bundle: string;
  tick: number;
  channel: number;
  lattice: number;
}

/** Sums of the one-step residual of a channel over a segment, as shares of the bundle's expected spread. */
export interface ResidualTable {
  segment: number;
  channel: number;
  count: number;
  sum: number;
  square_sum: number;
}

/** Bundle documents seen, by hex digest: the archive explains itself without the folder they came from. */
export interface BundleTable {
  digest: string;
  site: string;
  document: Blob;
  added_ms: number;
}

/** What the columns of spans made without a bundle hold, by hex digest: such segments say it themselves. */
export interface LayoutTable {
  digest: string;
  site: string;
  document: Blob;
}

/** What was refused and never receipted, counted by cause. */
export interface RefusalTable {
  site: string;
  cause: string;
  count: number;
  last_ms: number;
  message: string;
}

/** All tables, by name. */
export interface Tables {
  meta: MetaTable;
  segments: SegmentTable;
  conflicts: ConflictTable;
  spans: SpanTable;
  corrections: CorrectionTable;
  residuals: ResidualTable;
  bundles: BundleTable;
  layouts: LayoutTable;
  refusals: RefusalTable;
}

/** Step i brings a store of version i to version i + 1; steps are only ever added. */
export const SCHEMA_STEPS: readonly ((db: Kysely<Tables>) => Promise<void>)[] = [
  createFirstTables,
  indexWhatIsNew,
  keepLayouts,
  markCoarse,
];

async function createFirstTables(db: Kysely<Tables>): Promise<void> {
  for (const statement of FIRST_TABLES) await sql.raw(statement).execute(db);
}

/** What ends after a tick is found without a look at what ends before it. */
async function indexWhatIsNew(db: Kysely<Tables>): Promise<void> {
  await sql.raw('CREATE INDEX spans_end ON spans (site, (first_tick + ticks))').execute(db);
  await sql.raw('CREATE INDEX corrections_tick ON corrections (site, tick)').execute(db);
}

/** Segments made without a bundle are decoded from here on. */
async function keepLayouts(db: Kysely<Tables>): Promise<void> {
  await sql
    .raw('CREATE TABLE layouts (digest TEXT PRIMARY KEY, site TEXT NOT NULL, document BLOB NOT NULL)')
    .execute(db);
}

async function markCoarse(db: Kysely<Tables>): Promise<void> {
  await sql.raw('ALTER TABLE spans ADD COLUMN coarseness BLOB').execute(db);
}

const FIRST_TABLES = [
  `CREATE TABLE segments (
    id INTEGER PRIMARY KEY AUTOINCREMENT,
    site TEXT NOT NULL, gateway TEXT NOT NULL, stream TEXT NOT NULL, number INTEGER NOT NULL,
    hash BLOB NOT NULL, bundle TEXT NOT NULL, first_tick INTEGER NOT NULL, ticks INTEGER NOT NULL,
    keyed INTEGER NOT NULL, bytes BLOB NOT NULL, size INTEGER NOT NULL,
    received_ms INTEGER NOT NULL, last_ms INTEGER NOT NULL, copies INTEGER NOT NULL,
    receipted INTEGER NOT NULL,
    state TEXT NOT NULL, reason TEXT, readings INTEGER, end_state BLOB,
    UNIQUE (site, gateway, stream, number))`,
  'CREATE INDEX segments_state ON segments (state, bundle)',
  `CREATE TABLE conflicts (
    site TEXT NOT NULL, gateway TEXT NOT NULL, stream TEXT NOT NULL, number INTEGER NOT NULL,
    hash BLOB NOT NULL, bytes BLOB NOT NULL, received_ms INTEGER NOT NULL,
    UNIQUE (site, gateway, stream, number, hash))`,
  `CREATE TABLE spans (
    segment INTEGER PRIMARY KEY, site TEXT NOT NULL, bundle TEXT NOT NULL,
    first_tick INTEGER NOT NULL, ticks INTEGER NOT NULL, channels INTEGER NOT NULL, lattice BLOB NOT NULL)`,
  'CREATE INDEX spans_site ON spans (site, first_tick)',
  `CREATE TABLE corrections (
    segment INTEGER NOT NULL, entry INTEGER NOT NULL, site TEXT NOT NULL, bundle TEXT NOT NULL,
    tick INTEGER NOT NULL, channel INTEGER NOT NULL, lattice REAL NOT NULL, PRIMARY KEY (segment, entry))`,
  'CREATE INDEX corrections_site ON corrections (site)',
  `CREATE TABLE residuals (
    segment INTEGER NOT NULL, channel INTEGER NOT NULL, count INTEGER NOT NULL,
    sum REAL NOT NULL, square_sum REAL NOT NULL, PRIMARY KEY (segment, channel))`,
  'CREATE TABLE bundles (digest TEXT PRIMARY KEY, site TEXT NOT NULL, document BLOB NOT NULL, added_ms INTEGER NOT NULL)',
  `CREATE TABLE refusals (
    site TEXT NOT NULL, cause TEXT NOT NULL, count INTEGER NOT NULL, last_ms INTEGER NOT NULL, message TEXT NOT NULL,
    PRIMARY KEY (site, cause))`,
] as const;
