/**
 * Where the record of a data folder goes on: with the bundle or the plain record that its checkpoint names, if they still
 * fit the site file. Where they do not, a new stream of segments starts; what a plain record had not closed yet is first
 * closed under its own channels, since it says itself what they are.
 */
import type { Site } from '@stillwell/protocol';
import type { BundleKeeper } from '../bundle/change.ts';
import type { Disk } from '../disk.ts';
import { RuntimeError } from '../errors.ts';
import type { Aligner, OpenReadings } from '../ingest/align.ts';
import { Serving } from '../serving.ts';
import { budgetOf } from './budget.ts';
import type { Checkpoint } from './checkpoint.ts';
import { Journal } from './journal.ts';
import { isLayoutOf, PlainRecord } from './plain-record.ts';
import { type Identity, openIdentity, type Recovered, recover, renewIdentity } from './recover.ts';
import { Spool } from './spool.ts';
import { eachReading, type WalRecord } from './wal.ts';

/** What a record is opened with. */
export interface RecordOptions {
  readonly site: Site;
  readonly gateway: string;
  readonly disk: Disk;
  readonly folder: string;
  readonly spoolBytes: number;
  /** 8 bytes; random unless given. */
  readonly stream?: Uint8Array;
  readonly note: (level: 'info' | 'warn', text: string) => void;
}

/** A reading of a tick that was not closed yet, under the site file of now. */
export interface LeftReading {
  readonly channel: number;
  readonly timeMs: number;
  readonly value: number;
}

/** Where a record goes on. */
export interface RecordStart {
  readonly identity: Identity;
  /** What to go on with; null: from nothing. */
  readonly from: { readonly recovered: Recovered; readonly recorded: Serving | PlainRecord } | null;
  /** Left by a record that could not be gone on with. */
  readonly left: readonly LeftReading[];
  /** Ticks before this one were closed by it; null where that says nothing. */
  readonly nextTick: number | null;
}

const NOTHING_LEFT = { from: null, left: [], nextTick: null } as const;

/** throws  RuntimeError 'data-folder' when the folder is another gateway's, damaged, or cannot be written where it must be */
export function openRecord(options: RecordOptions, keeper: BundleKeeper): RecordStart {
  const { site, gateway, disk, folder, stream, note } = options;
  const identity = openIdentity(disk, folder, site.site, gateway, stream);
  const recovered = recover(disk, folder, identity.stream);
  if (recovered === null) return { identity, ...NOTHING_LEFT };
  const renewed = (why: string): Identity => {
    note('warn', `${why}: a new stream of segments starts, the filter starts afresh`);
    return renewIdentity(disk, folder, identity);
  };
  if (recovered === 'damaged') return { identity: renewed('the checkpoint is gone or damaged'), ...NOTHING_LEFT };
  const { checkpoint } = recovered;
  const recorded = isWithoutBundle(checkpoint) ? plainOf(checkpoint, site) : servingOf(checkpoint, keeper);
  if (recorded === null) return { identity: renewed('the bundle of the checkpoint is gone'), ...NOTHING_LEFT };
  if (recorded instanceof Serving || isLayoutOf(recorded.layout, site))
    return { identity, ...NOTHING_LEFT, from: { recovered, recorded } };
  const left = closeRecord(recorded, recovered, identity, options);
  const { layout, tick } = recorded;
  const nextTick = tick >= 0 && layout.tickMs === site.tickMs ? tick + 1 : null;
  return { ...NOTHING_LEFT, identity: renewed('the site file has other signals than before'), left, nextTick };
}

function isWithoutBundle({ bundle }: Checkpoint): boolean {
  return bundle.every((byte) => byte === 0);
}

function plainOf(checkpoint: Checkpoint, site: Site): PlainRecord | null {
  try {
    return PlainRecord.restored(checkpoint.state, site);
  } catch {
    return null;
  }
}

function servingOf({ bundle, state, bounds }: Checkpoint, keeper: BundleKeeper): Serving | null {
  const known = keeper.byDigest(bundle);
  if (known === null) return null;
  const serving = new Serving(known);
  try {
    serving.restore(state, bounds);
    return serving;
  } catch {
    return null;
  }
}

/** Closes the open segment of a record under its own channels; what of its readings is in no tick yet. */
function closeRecord(
  record: PlainRecord,
  { checkpoint, records }: Recovered,
  { stream }: Identity,
  { disk, folder, site, gateway, spoolBytes }: RecordOptions,
): LeftReading[] {
  const name = Buffer.from(stream).toString('hex');
  const spool = new Spool(disk, `${folder}/spool`, spoolBytes, name);
  spool.discardFrom(name, checkpoint.number);
  const { channelCount } = record;
  const budget = budgetOf(site, spoolBytes);
  const none = {
    disk,
    folder,
    site: site.site,
    gateway,
    stream,
    spool,
    budget,
    channelCount,
    openReadings: noReadings,
  };
  const journal = new Journal({ ...none, segmentTicks: Number.POSITIVE_INFINITY, keepTicks: 0 }, checkpoint);
  journal.startFrom(checkpoint.state);
  const indexOf = channelsInSite(record, site);
  const left: LeftReading[] = [];
  for (const one of records) {
    if (one.kind === 'tick') {
      record.step(one.tick, one.values, () => undefined);
      journal.coded(record);
    } else if (one.kind === 'change') journal.changed(one, record.indexOf(one.channel, one.value), record);
    else if (one.kind === 'readings')
      eachReading(one, (channel, timeMs, value) => {
        if (indexOf[channel]! >= 0) left.push({ channel: indexOf[channel]!, timeMs, value });
      });
  }
  journal.turnOver(record, record);
  journal.stop();
  if (journal.fault !== null)
    throw new RuntimeError(
      'data-folder',
      `data folder ${folder}: the site file has other signals than before, and what was recorded under the old ones cannot ` +
        `be closed (${journal.fault}); make room or make it writable, then start again`,
    );
  const closedMs = (record.tick + 1) * record.layout.tickMs;
  return left.filter(({ timeMs }) => timeMs >= closedMs);
}

/** (nc of the record) each channel's place in the site file, -1 where it is not the same quantity there. */
function channelsInSite({ layout }: PlainRecord, site: Site): readonly number[] {
  const now = PlainRecord.of(site).layout.channels;
  return layout.channels.map((was) =>
    now.findIndex(
      ({ name, role, unit, aggregate }) =>
        name === was.name && role === was.role && unit === was.unit && aggregate === was.aggregate,
    ),
  );
}

function noReadings(): OpenReadings {
  return { marks: { newestMs: Number.NEGATIVE_INFINITY, counters: [], latest: [] }, visit: () => {} };
}

/** Brings an aligner to what it knew when a frame of the journal was written. */
export function alignFrame(aligner: Aligner, record: WalRecord): void {
  if (record.kind === 'start') aligner.restore(record.marks);
  else if (record.kind === 'tick') aligner.replayClose(record.tick);
  else if (record.kind === 'readings')
    eachReading(record, (channel, timeMs, value) => aligner.replay(channel, timeMs, value));
}
