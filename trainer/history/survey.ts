/**
 * The survey of a history: what is wrong with it, in plain sentences, and a row of figures a signal. Plain data, the same
 * for the same files and site file, so that its digest can stand in a bundle.
 */
import { basename } from 'node:path';
import type { Signal, Site } from '@stillwell/protocol';
import { withoutExcluded } from '../exclusions.ts';
import { type Cadence, cadenceFindings, cadenceOf, suggestTick, tooFineTick } from './cadence.ts';
import { channelsOf } from './channels.ts';
import { clockChangeFindings } from './clock-changes.ts';
import { copyFindings } from './copies.ts';
import { fileFindings } from './file-findings.ts';
import { type Finding, iso } from './finding.ts';
import { gapFindings, presenceOf } from './gaps.ts';
import type { ChannelReadings, FileRead, History } from './history.ts';
import { outsideFindings, spikeFindings } from './implausible.ts';
import { latticeFindings, singleFindings } from './lattice-findings.ts';
import { type FoundLattice, findLattices } from './resolution.ts';
import type { Series } from './series.ts';
import { NEAR_CONSTANT, stuckFindings } from './stuck.ts';
import { type Suggestion, suggestExclusions } from './suggestions.ts';
import { timeOrder } from './ticks.ts';
import { timeOrderFindings } from './time-order.ts';
import { seeValues, type ValuesSeen } from './values-seen.ts';

const FORMAT = 1;
/** Parts of the history that the presence of a signal is told for. */
const PRESENCE_BINS = 48;

/** Figures of one signal or input. */
export interface SurveyedSignal {
  readonly name: string;
  readonly role: 'signal' | 'input';
  readonly unit: string;
  /** Fields with a number in the files. */
  readonly readings: number;
  /** Share of the ticks without a reading. */
  readonly missingShare: number;
  /** Usual interval and its median absolute deviation, seconds; null where there are not two readings. */
  readonly intervalS: number | null;
  readonly jitterS: number | null;
  readonly lattice: FoundLattice;
  /** Of the values as laid on ticks; null where there is none. */
  readonly least: number | null;
  readonly median: number | null;
  readonly greatest: number | null;
  /** Constant, or one value nearly throughout. */
  readonly isStill: boolean;
  /** Share of ticks with a reading, by equal parts of the history. */
  readonly presence: readonly number[];
}

/** The whole survey; dates are ISO, UTC. */
export interface Survey {
  readonly format: number;
  readonly site: string;
  readonly files: readonly Pick<FileRead, 'file' | 'format' | 'separator' | 'rows' | 'bytes' | 'sha256' | 'timeKind'>[];
  readonly from: string;
  /** End of the last tick. */
  readonly to: string;
  readonly tickS: number;
  readonly suggestedTickS: number;
  readonly ticks: number;
  /** Zone used for times that carry none; null when none did. */
  readonly zone: string | null;
  readonly signals: readonly SurveyedSignal[];
  /** The weightiest first. */
  readonly findings: readonly Finding[];
  /** Time that perhaps should not teach, for a person to decide, as entries of the site file's `exclude`. */
  readonly suggestions: readonly Suggestion[];
}

function freezeDeep<T>(value: T): T {
  if (typeof value === 'object' && value !== null && !Object.isFrozen(value)) {
    Object.freeze(value);
    for (const one of Object.values(value)) freezeDeep(one);
  }
  return value;
}

function secondsOrNull(ms: number): number | null {
  return Number.isNaN(ms) ? null : ms / 1000;
}

function figuresOf(
  signal: Signal,
  role: SurveyedSignal['role'],
  channel: ChannelReadings,
  laid: Float64Array,
  cadence: Cadence,
  lattice: FoundLattice,
  seen: ValuesSeen,
): SurveyedSignal {
  return {
    name: signal.name,
    role,
    unit: signal.unit,
    readings: channel.values.reduce((sum, value) => sum + (Number.isNaN(value) ? 0 : 1), 0),
    missingShare: Number((1 - seen.readings / laid.length).toFixed(6)),
    intervalS: secondsOrNull(cadence.intervalMs),
    jitterS: secondsOrNull(cadence.jitterMs),
    lattice,
    least: seen.least,
    median: seen.median,
    greatest: seen.greatest,
    isStill: !(seen.commonestShare < NEAR_CONSTANT),
    presence: presenceOf(laid, PRESENCE_BINS),
  };
}

/** Findings on order and repetition, once for each array of times. */
function orderFindings(history: History, orders: ReadonlyMap<Float64Array, Uint32Array | null>): Finding[] {
  return [...orders].flatMap(([times, order]) => {
    const sharing = history.channels.filter((channel) => channel.times === times);
    const name = sharing.length === history.channels.length ? null : sharing.map((channel) => channel.name).join(', ');
    return timeOrderFindings(name, sharing[0] as ChannelReadings, order);
  });
}

/** Cadence by channel; channels that share their times and miss none of them share the work. */
function cadencesOf(history: History, orders: ReadonlyMap<Float64Array, Uint32Array | null>): Cadence[] {
  const whole = new Map<Float64Array, Cadence>();
  return history.channels.map((channel) => {
    const isWhole = !channel.values.some(Number.isNaN);
    const known = isWhole ? whole.get(channel.times) : undefined;
    const cadence = known ?? cadenceOf(channel, orders.get(channel.times) ?? null);
    if (isWhole) whole.set(channel.times, cadence);
    return cadence;
  });
}

const WEIGHTS = { serious: 0, look: 1, note: 2 } as const;

/**
 * Looks a history over.
 *
 * series    the same history laid on ticks
 * lattices  as layOnTicks had them; found again when absent
 * teaching  the series with what the site file excludes told apart; the same where it excludes nothing
 */
export function surveyHistory(
  history: History,
  series: Series,
  site: Site,
  lattices: readonly FoundLattice[] = findLattices(history, site),
  teaching: Series = series,
): Survey {
  const orders = new Map(history.channels.map(({ times }) => [times, null as Uint32Array | null]));
  for (const times of orders.keys()) orders.set(times, timeOrder(times));
  const channels = channelsOf(site);
  const cadences = cadencesOf(history, orders);
  const seen = series.values.map(seeValues);
  const signals = channels.map((signal, c) =>
    figuresOf(
      signal,
      c < history.signalCount ? 'signal' : 'input',
      history.channels[c] as ChannelReadings,
      series.values[c] as Float64Array,
      cadences[c] as Cadence,
      lattices[c] as FoundLattice,
      seen[c] as ValuesSeen,
    ),
  );
  const tooFine = tooFineTick(cadences, site.tickMs);
  const findings = [
    ...(tooFine === null ? [] : [tooFine]),
    ...clockChangeFindings(history),
    ...orderFindings(history, orders),
    ...gapFindings(series),
    ...channels.flatMap((signal, c) => [
      ...stuckFindings(series, c, seen[c] as ValuesSeen),
      ...outsideFindings(signal, history.channels[c] as ChannelReadings),
      ...spikeFindings(series, c),
      ...latticeFindings(signal, history.channels[c] as ChannelReadings, lattices[c] as FoundLattice),
      ...cadenceFindings(signal.name, cadences[c] as Cadence, site.tickMs, tooFine !== null),
    ]),
    ...singleFindings(channels, lattices),
    ...copyFindings(
      series,
      signals.map(({ isStill }) => isStill),
    ),
    ...fileFindings(history.files),
  ].sort((a, b) => WEIGHTS[a.weight] - WEIGHTS[b.weight]);
  return freezeDeep({
    format: FORMAT,
    site: site.site,
    files: history.files.map(({ file, format, separator, rows, bytes, sha256, timeKind }) => ({
      file: basename(file),
      format,
      separator,
      rows,
      bytes,
      sha256,
      timeKind,
    })),
    from: iso(series.firstTick * series.tickMs),
    to: iso((series.firstTick + series.ticks) * series.tickMs),
    tickS: series.tickMs / 1000,
    suggestedTickS: suggestTick(cadences.map(({ intervalMs }) => intervalMs)) / 1000,
    ticks: series.ticks,
    zone: history.zone,
    signals,
    findings,
    suggestions: suggestExclusions(withoutExcluded(teaching), seen),
  });
}
