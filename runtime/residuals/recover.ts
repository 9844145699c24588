/** What a data folder remembers: its identity, and the checkpoint and journal to go on from. */
import { randomBytes } from 'node:crypto';
import { join } from 'node:path';
import { type Disk, replaceOn } from '../disk.ts';
import { RuntimeError } from '../errors.ts';
import { type Checkpoint, decodeCheckpoint } from './checkpoint.ts';
import type { KeptJournal } from './journal.ts';
import { checkpointPath, journalFolder, journalPath } from './journal-files.ts';
import { readWal, type WalRecord } from './wal.ts';

/** Who writes into a data folder. */
export interface Identity {
  readonly site: string;
  readonly gateway: string;
  /** 8 bytes, random at the first start of the folder: two folders never continue each other's numbers. */
  readonly stream: Uint8Array;
}

/** The journal of the open segment and those kept before it. */
export interface Recovered {
  readonly checkpoint: Checkpoint;
  readonly records: readonly WalRecord[];
  /** Bytes of the open journal file that check. */
  readonly validBytes: number;
  /** Bytes cut from its end. */
  readonly tornBytes: number;
  readonly kept: readonly KeptJournal[];
  /** What the kept files say, oldest first, read as it is asked for. */
  readonly earlier: Iterable<WalRecord>;
}

/**
 * Reads or makes the identity of a data folder.
 *
 * throws  RuntimeError 'data-folder' when the folder belongs to another site or gateway, or its identity is damaged
 */
export function openIdentity(disk: Disk, folder: string, site: string, gateway: string, stream?: Uint8Array): Identity {
  const path = join(folder, 'identity.json');
  const bytes = disk.read(path);
  if (bytes === null) {
    const identity = { site, gateway, stream: stream ?? new Uint8Array(randomBytes(8)) };
    writeIdentity(disk, folder, identity);
    return identity;
  }
  const known = parseIdentity(bytes, path);
  if (known.site !== site || known.gateway !== gateway)
    throw new RuntimeError(
      'data-folder',
      `data folder ${folder}: expected site ${site}, gateway ${gateway}, got ${known.site}, ${known.gateway}; ` +
        'give each gateway a folder of its own (--data), or name it as it was (--gateway)',
    );
  return known;
}

/** A new stream for a folder whose numbers can no longer be continued. */
export function renewIdentity(disk: Disk, folder: string, identity: Identity): Identity {
  const renewed = { ...identity, stream: new Uint8Array(randomBytes(8)) };
  writeIdentity(disk, folder, renewed);
  return renewed;
}

/** The same in the midst of a run, where the disk may fail: the next start then finds another stream's checkpoint and renews. */
export function replaceIdentity(disk: Disk, folder: string, identity: Identity): Identity {
  const renewed = { ...identity, stream: new Uint8Array(randomBytes(8)) };
  try {
    for (const name of disk.list(journalFolder(folder))) disk.remove(join(journalFolder(folder), name));
    writeIdentity(disk, folder, renewed);
  } catch {
    // Said by the journal, which cannot write either.
  }
  return renewed;
}

/**
 * Reads checkpoint and journal files.
 *
 * returns  null for a fresh folder; 'damaged' when the checkpoint is gone or cannot be continued
 */
export function recover(disk: Disk, folder: string, stream: Uint8Array): Recovered | 'damaged' | null {
  const bytes = disk.read(checkpointPath(folder));
  if (bytes === null) return hasCountedOn(disk, folder) ? 'damaged' : null;
  const checkpoint = decodeCheckpoint(bytes);
  if (checkpoint === null || Buffer.compare(checkpoint.stream, stream) !== 0) return 'damaged';
  const kept: KeptJournal[] = [];
  for (const name of disk.list(journalFolder(folder))) {
    const number = Number(/^(\d{10})\.swj$/.exec(name)?.[1] ?? Number.NaN);
    if (Number.isNaN(number) || number === checkpoint.number) continue;
    const content = number < checkpoint.number ? readOwn(disk, folder, number, stream) : null;
    if (content === null) {
      disk.remove(join(journalFolder(folder), name));
      continue;
    }
    const ticks = content.records.filter((record) => record.kind === 'tick').length;
    kept.push({ number, ticks, bytes: content.validBytes });
  }
  const content = readOwn(disk, folder, checkpoint.number, stream);
  const size = disk.size(journalPath(folder, checkpoint.number));
  const validBytes = content?.validBytes ?? 0;
  const earlier = recordsOf(disk, folder, stream, kept);
  return { checkpoint, records: content?.records ?? [], validBytes, tornBytes: size - validBytes, kept, earlier };
}

/** Whether numbers were given away already: starting at 0 again would give them to other contents. */
function hasCountedOn(disk: Disk, folder: string): boolean {
  return disk.list(journalFolder(folder)).some((name) => Number(/^(\d{10})\.swj$/.exec(name)?.[1] ?? 0) > 0);
}

/** One file in memory at a time. */
function* recordsOf(
  disk: Disk,
  folder: string,
  stream: Uint8Array,
  kept: readonly KeptJournal[],
): Generator<WalRecord> {
  for (const { number } of kept) yield* readOwn(disk, folder, number, stream)?.records ?? [];
}

function readOwn(disk: Disk, folder: string, number: number, stream: Uint8Array): ReturnType<typeof readWal> {
  const bytes = disk.read(journalPath(folder, number));
  const content = bytes === null ? null : readWal(bytes);
  if (content === null || content.head.number !== number || Buffer.compare(content.head.stream, stream) !== 0)
    return null;
  return content;
}

function writeIdentity(disk: Disk, folder: string, identity: Identity): void {
  const { site, gateway, stream } = identity;
  const text = JSON.stringify({ site, gateway, stream: Buffer.from(stream).toString('hex') }, null, 2);
  disk.makeFolder(folder);
  replaceOn(disk, join(folder, 'identity.json'), Buffer.from(`${text}\n`, 'utf8'));
}

function parseIdentity(bytes: Uint8Array, path: string): Identity {
  try {
    const { site, gateway, stream } = JSON.parse(Buffer.from(bytes).toString('utf8')) as Record<string, unknown>;
    if (
      typeof site === 'string' &&
      typeof gateway === 'string' &&
      typeof stream === 'string' &&
      /^[0-9a-f]{16}$/.test(stream)
    )
      return { site, gateway, stream: new Uint8Array(Buffer.from(stream, 'hex')) };
  } catch {
    // Falls through to the one message for every kind of damage.
  }
  throw new RuntimeError(
    'data-folder',
    `${path}: expected site, gateway and stream as JSON, got something else; move the data folder aside to start afresh`,
  );
}
