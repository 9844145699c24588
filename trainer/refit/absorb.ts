/**
 * Joins what the desk recovered with the files of the first fit into one series: where both cover a tick, the archive wins,
 * since it is what the gateway really saw, late readings included.
 */
import { latticeIndex, latticeValue, type Signal, type Site } from '@stillwell/protocol';
import type { Archive, ArchivedChannel } from '../desk/archive.ts';
import { TrainError } from '../errors.ts';
import { believe } from '../exclusions.ts';
import { channelsOf } from '../history/channels.ts';
import type { ChannelReadings, FileRead, History } from '../history/history.ts';
import { findLattices, type Lattice } from '../history/resolution.ts';
import type { Series } from '../history/series.ts';
import { type Survey, surveyHistory } from '../history/survey.ts';
import { digestOf, layOnTicks } from '../history/ticks.ts';
import { momentText } from '../text-table.ts';

/** One series, and where the archive's part of it begins. */
export interface Absorbed {
  readonly series: Series;
  readonly survey: Survey;
  readonly lattices: readonly Lattice[];
  /** First tick that only the archive covers; the series' first tick where there are no files. */
  readonly newFromTick: number;
}

/** A series with more ticks than these to one with a reading has a stray time in it. */
const MOST_EMPTY = 1000;

/**
 * Joins archive and files.
 *
 * files   the history as read, null where none is given
 * throws  TrainError 'archive' where the archive lacks a signal of the site file or has another tick, 'history' as layOnTicks
 */
export function absorb(archive: Archive, files: History | null, site: Site): Absorbed {
  const channels = channelsOf(site);
  checkFit(archive, channels, site);
  const ofArchive = asHistory(archive, channels, site);
  const history = files === null ? ofArchive : joined(files, ofArchive);
  const found = findLattices(history, site).map((one, c) => ({ ...one, ...archived(archive, channels[c]!).lattice }));
  const lattices = found.map(({ step, offset }) => ({ step, offset }));
  const before = files === null ? null : layOnTicks(believe(files, site).seen, site, lattices);
  const series = overlay(archive, before, channels, lattices, site);
  const marked = believe(history, site).mark(series);
  return {
    series: marked,
    survey: surveyHistory(history, series, site, found, marked),
    lattices,
    newFromTick: before === null ? series.firstTick : before.firstTick + before.ticks,
  };
}

function archived(archive: Archive, { name }: Signal): ArchivedChannel {
  return archive.channels.find((one) => one.name === name)!;
}

function checkFit(archive: Archive, channels: readonly Signal[], site: Site): void {
  if (archive.tickMs !== site.tickMs) {
    throw new TrainError(
      'archive',
      `archive of ${site.site}: its ticks are ${archive.tickMs / 1000} s, the site file says ${site.tickMs / 1000} s; ` +
        'refit with the site file that its bundles were made with',
    );
  }
  const missing = channels.filter(({ name }) => !archive.channels.some((one) => one.name === name));
  if (missing.length > 0) {
    throw new TrainError(
      'archive',
      `archive of ${site.site}: expected a channel for every signal and input of the site file, found none for ` +
        `${missing.map((one) => `"${one.name}"`).join(', ')}; new signals need a first fit from history files`,
    );
  }
}

/** Archive and earlier series by channel, over all ticks from the first to the last. */
function overlay(
  archive: Archive,
  before: Series | null,
  channels: readonly Signal[],
  lattices: readonly Lattice[],
  site: Site,
): Series {
  const { ticks } = archive;
  const firstTick = Math.min(ticks[0]!, before?.firstTick ?? Number.POSITIVE_INFINITY);
  const end = Math.max(ticks[ticks.length - 1]! + 1, before === null ? 0 : before.firstTick + before.ticks);
  const count = end - firstTick;
  const covered = ticks.length + (before?.ticks ?? 0);
  if (count > 1_000_000 && count / covered > MOST_EMPTY) {
    throw new TrainError(
      'archive',
      `archive of ${site.site}: expected readings most of the time, got ${covered} ticks in the ${count} from ` +
        `${momentText(firstTick * site.tickMs)} to ${momentText(end * site.tickMs)}; a gateway may have run with a wrong ` +
        'clock: give --from or --until',
    );
  }
  const values = channels.map((channel, c) => {
    const laid = new Float64Array(count).fill(Number.NaN);
    if (before !== null) laid.set(before.values[c]!, before.firstTick - firstTick);
    const { values: column } = archived(archive, channel);
    const { step, offset } = lattices[c]!;
    // What was recorded under a bundle lies there already; without one a stray may not.
    for (let i = 0; i < ticks.length; i++)
      if (!Number.isNaN(column[i]))
        laid[ticks[i]! - firstTick] = latticeValue(latticeIndex(column[i]!, step, offset), step, offset);
    return laid;
  });
  const digest = digestOf(site.tickMs, firstTick, values);
  const names = channels.map(({ name }) => name);
  const { tickMs } = site;
  return Object.freeze({ tickMs, firstTick, ticks: count, names, signalCount: site.signals.length, values, digest });
}

/** The archive's values as readings at the labels of their ticks, for the survey. */
function asHistory(archive: Archive, channels: readonly Signal[], site: Site): History {
  const times = archive.ticks.map((tick) => tick * archive.tickMs);
  const values = channels.map((channel) => archived(archive, channel).values);
  const file: FileRead = {
    file: `archive of ${archive.site}`,
    format: 'desk archive',
    separator: null,
    rows: times.length,
    bytes: 0,
    // No file of its own: the digest of the readings stands in.
    sha256: Buffer.from(digestOf(archive.tickMs, archive.ticks[0]!, [archive.ticks, ...values])).toString('hex'),
    timeKind: 'epoch milliseconds',
    columnsIgnored: [],
    missingMarks: {},
    passedOver: {},
  };
  const readings = channels.map(({ name }, c) => ({ name, times, values: values[c]! }));
  return { channels: readings, signalCount: site.signals.length, files: [file], zone: null, clockChanges: [] };
}

/** Files first, then the archive, channel by channel. */
function joined(files: History, archive: History): History {
  const channels: ChannelReadings[] = files.channels.map((channel, c) => {
    const more = archive.channels[c]!;
    return {
      name: channel.name,
      times: concat(channel.times, more.times),
      values: concat(channel.values, more.values),
    };
  });
  return { ...files, channels, files: [...files.files, ...archive.files] };
}

function concat(first: Float64Array, second: Float64Array): Float64Array {
  const both = new Float64Array(first.length + second.length);
  both.set(first);
  both.set(second, first.length);
  return both;
}
