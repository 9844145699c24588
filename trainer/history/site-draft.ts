/**
 * A first site file from a history: what the readings tell (signals, tick, resolution, ranges), with room for what they do
 * not. A person is expected to go over it; the comments say where.
 */
import {
  AS_SENT,
  DEFAULT_RESIDUAL_BYTES_PER_DAY,
  DEFAULT_ROOT,
  defaultWarnRule,
  type Signal,
  type Site,
} from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import type { Progress } from '../progress.ts';
import { cadenceOf, suggestTick } from './cadence.ts';
import { ColumnsEngine } from './columns-engine.ts';
import { type Discovered, discoverSignals } from './discover.ts';
import { findFiles } from './find-files.ts';
import { counted, figure, lengthOf } from './finding.ts';
import type { Gathering } from './gathering.ts';
import type { ChannelReadings, History } from './history.ts';
import { LET_PASS, olderNote, readNewest } from './long.ts';
import { plausibleSpan } from './plausible.ts';
import { type ReadOptions, readShort } from './read.ts';
import { type FoundLattice, findLattice } from './resolution.ts';
import { SizeWatch } from './span-watch.ts';
import { timeOrder } from './ticks.ts';
import { fixedZoneName } from './zone.ts';

const DAY_MS = 86_400_000;
/** Values that a draft is made from in memory, 32 MB. */
const MOST_VALUES = 4_000_000;
/** A day ahead where that many ticks make one: fewer teach little of a day, more cost bundle and sharpness. */
const DAY_HORIZON = [24, 144] as const;
const DEFAULT_HORIZON = 24;
const MOST_LATENESS_MS = 10_000;
/** A signal with no more values than these, all whole, is a switch or a count. */
const SWITCH_VALUES = 4;

/** A draft, what to say beside its lines by field path, and the readings it was made from. */
export interface SiteDraft {
  readonly site: Site;
  /** The same with nothing declared that the readings were to be checked against. */
  readonly undeclared: Site;
  readonly history: History;
  readonly comments: Readonly<Record<string, string>>;
  /** Says that only the newest part of a long history was looked at; null where all was. */
  readonly note: string | null;
}

/** What the readings cannot tell of a site. */
export interface DraftOptions {
  readonly name: string;
  readonly equipmentClass: string;
  /** Zone of times that carry none; null: they are refused. */
  readonly zone: string | null;
  readonly progress?: Progress;
  /** Values held at most before only the newest part is looked at; 4 million when absent. */
  readonly mostValues?: number;
}

function signalOf(found: Discovered, siteName: string): Signal {
  return {
    name: found.name,
    topic: found.topic ?? `plant/${siteName}/${found.name}`,
    payload: found.payload,
    unit: found.unit,
    ...AS_SENT,
    resolution: null,
    range: null,
    aggregate: 'mean',
    limits: { highHigh: null, high: null, low: null, lowLow: null },
    warn: null,
    column: found.column,
  };
}

/** Bounds a whole span beyond what was seen, on figures a person would write. */
function rangeOf(signal: Signal, readings: ChannelReadings): readonly [number, number] | null {
  const { low, high } = plausibleSpan(signal, readings.values);
  let least = Number.POSITIVE_INFINITY;
  let greatest = Number.NEGATIVE_INFINITY;
  for (const value of readings.values) {
    if (Number.isNaN(value) || value < low || value > high) continue;
    if (value < least) least = value;
    if (value > greatest) greatest = value;
  }
  if (least > greatest) return null;
  const span = greatest - least || Math.max(1, Math.abs(least));
  const unit = 10 ** Math.floor(Math.log10(span));
  const whole = (k: number): number => Number((k * unit).toPrecision(12));
  return [whole(Math.floor((least - span) / unit)), whole(Math.ceil((greatest + span) / unit))];
}

function isSwitch(values: Float64Array): boolean {
  const seen = new Set<number>();
  for (const value of values) {
    if (Number.isNaN(value)) continue;
    if (!Number.isInteger(value)) return false;
    seen.add(value);
    if (seen.size > SWITCH_VALUES) return false;
  }
  return true;
}

/** None where the values show none: a step declared must be one that every reading keeps to. */
function resolutionOf({ how, step, offset }: FoundLattice): number | null {
  return how === 'no readings' || how === 'computed' || offset !== 0 ? null : step;
}

function filledIn(signal: Signal, readings: ChannelReadings): Signal {
  const range = rangeOf(signal, readings);
  const { low, high } = plausibleSpan(signal, readings.values);
  const believed = readings.values.filter((value) => value >= low && value <= high);
  return {
    ...signal,
    range,
    resolution: resolutionOf(findLattice(believed)),
    aggregate: isSwitch(believed) ? 'last' : 'mean',
  };
}

function horizonOf(tickMs: number): number {
  const day = DAY_MS / tickMs;
  return Number.isInteger(day) && day >= DAY_HORIZON[0] && day <= DAY_HORIZON[1] ? day : DEFAULT_HORIZON;
}

function commentsOf(site: Site, history: History, intervalsMs: readonly number[]): Record<string, string> {
  const comments: Record<string, string> = {
    '': `A first site file, found in ${counted(history.files.length, 'history file')}. Go over it: units, topics, ranges, and which signals are inputs (move those to "inputs").\nWhat readings cannot tell was left at its default. Advisory only: nothing here belongs to a protection or interlock function.`,
    time_zone:
      history.zone === null
        ? 'the files carry their own zone; set this to where the plant stands, for times of day'
        : 'as given for times without a zone',
    tick: `readings come every ${[...new Set(intervalsMs.filter((ms) => ms > 0).map(lengthOf))].join(', ')}`,
    horizon: `ticks ahead: ${lengthOf(site.horizon * site.tickMs)}`,
    lateness: 'how long a tick waits for late readings',
    residual_budget: 'bytes a day over the thin link',
  };
  site.signals.forEach((signal, i) => {
    const at = `signals[${i}]`;
    if (history.files.every(({ format }) => format !== 'MQTT capture'))
      comments[`${at}.topic`] = 'a proposal: set it to the plant’s own topic';
    if (signal.unit === '1')
      comments[`${at}.unit`] = 'UCUM code, for instance Cel, m3/h, bar, %; 1 where dimensionless';
    if (signal.resolution !== null)
      comments[`${at}.resolution`] = `found: every reading is a multiple of ${figure(signal.resolution)}`;
    comments[`${at}.range`] =
      'what was seen, and as much again on either side; narrow it to what is physically possible';
  });
  return comments;
}

/**
 * Reads the files through and drafts a site file.
 *
 * throws  TrainError as readHistory does
 */
export async function draftSite(files: readonly string[], options: DraftOptions): Promise<SiteDraft> {
  const signals = (await discoverSignals(files)).map((found) => signalOf(found, options.name));
  const rough: Site = {
    site: options.name,
    equipmentClass: options.equipmentClass,
    timeZone: options.zone === null ? 'UTC' : fixedZoneName(options.zone),
    tickMs: 1000,
    horizon: DEFAULT_HORIZON,
    latenessMs: 0,
    root: DEFAULT_ROOT,
    residualBytesPerDay: DEFAULT_RESIDUAL_BYTES_PER_DAY,
    warn: defaultWarnRule(DEFAULT_HORIZON),
    signals,
    inputs: [],
    calendar: { timeOfDay: true, dayOfWeek: true, holidays: [] },
    exclude: [],
  };
  const progress = options.progress === undefined ? {} : { progress: options.progress };
  const reading = { zone: options.zone, requireZone: true, ...progress };
  const { history, note } = await readForDraft(files, rough, reading, options.mostValues ?? MOST_VALUES);
  const intervals = intervalsOf(history.channels);
  if (!intervals.some((ms) => ms > 0))
    throw new TrainError(
      'history',
      `${files.join(', ')}: expected readings at two times at least, to tell how often they come, got one time alone; give a longer history`,
    );
  const tickMs = suggestTick(intervals);
  const site: Site = {
    ...rough,
    tickMs,
    horizon: horizonOf(tickMs),
    warn: defaultWarnRule(horizonOf(tickMs)),
    latenessMs: Math.min(Math.ceil(tickMs / 10), MOST_LATENESS_MS),
    signals: signals.map((signal, c) => filledIn(signal, history.channels[c] as ChannelReadings)),
  };
  const comments = commentsOf(site, history, intervals);
  if (note !== null) comments[''] = `${comments['']}\n${note}`;
  return { site, undeclared: { ...site, signals }, history, comments, note };
}

/** The whole history where memory holds it; else its newest part, cut by the tick that its first readings suggest. */
async function readForDraft(
  files: readonly string[],
  rough: Site,
  options: ReadOptions,
  mostValues: number,
): Promise<{ readonly history: History; readonly note: string | null }> {
  const watch = new SizeWatch(mostValues);
  const engine = new ColumnsEngine();
  try {
    const whole = await readShort(findFiles(files, null), rough, options, watch, engine);
    if (whole !== null) return { history: whole, note: null };
  } finally {
    engine.close();
  }
  const names = rough.signals.map(({ name }) => name);
  const tickMs = suggestTick(intervalsOf((watch.gathered as Gathering).channels(names)));
  const { history, older } = await readNewest(files, { ...rough, tickMs }, options, () => LET_PASS);
  return { history, note: olderNote(older, tickMs) };
}

/** Usual interval of each channel, ms. */
function intervalsOf(channels: readonly ChannelReadings[]): number[] {
  return channels.map((channel) => cadenceOf(channel, timeOrder(channel.times)).intervalMs);
}
