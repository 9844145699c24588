/**
 * Time that must not teach: what the site file's `exclude` means for a history. Whole-plant entries leave the readings
 * where they are, since the gateway's filter will see such readings too, and mark their ticks; entries that name signals
 * say that those readings are not to be believed, so they are missing to everyone. Nothing excluded is used to find
 * lattices, ranges, scalings, seasons, the model, its bounds or the judge's numbers.
 */
import type { ExcludedWhile, Exclusion, Site } from '@stillwell/protocol';
import { channelsOf } from './history/channels.ts';
import { iso, lengthOf, percent } from './history/finding.ts';
import type { ChannelReadings, History } from './history/history.ts';
import type { ExcludedEntry, Series } from './history/series.ts';
import { timeOrder } from './history/ticks.ts';

/** From..to, ms since 1970 UTC; `to` no longer in it. */
interface Stretch {
  readonly fromMs: number;
  readonly toMs: number;
}

/** Stretches of one entry, in order of time and apart from each other. */
interface Found {
  readonly entry: Exclusion;
  readonly stretches: readonly Stretch[];
}

/** A history with what its site file excludes told apart. */
export interface Believed {
  /** As the gateway's filter may see it: readings of signals excluded by name are missing. */
  readonly seen: History;
  /** Without any excluded reading: for what is found once and for all, such as lattices. */
  readonly taught: History;
  /** Marks the excluded ticks of a series laid from the history, and takes out what is excluded by name. */
  mark(series: Series): Series;
}

/** What the readings before a part of a history said of one entry, where that may still hold. */
export interface Remembered {
  /** Since when its signal says so without an end, ms; null: it does not. */
  readonly sinceMs: number | null;
  /** Stretches in which it said so: from, to. */
  readonly stretches: readonly (readonly [fromMs: number, toMs: number])[];
}

/**
 * Tells apart what a site file excludes of a history, or of a part of one.
 *
 * remembered  by entry, what the part before said; nothing when absent
 * ahead       the part with readings that follow it, which may exclude time before them; the part itself when absent
 */
export function believe(
  history: History,
  site: Site,
  remembered: readonly Remembered[] = [],
  ahead: History = history,
): Believed {
  if (site.exclude.length === 0) return { seen: history, taught: history, mark: (series) => series };
  const found = site.exclude.map((entry, k) => ({ entry, stretches: stretchesOf(entry, ahead, site, remembered[k]) }));
  const faulty = found.filter(({ entry }) => entry.signals !== null);
  return {
    seen: withoutReadings(history, site, faulty),
    taught: withoutReadings(history, site, found),
    mark: (series) => marked(found, series),
  };
}

/** A series whose excluded ticks are missing: what is learned and calibrated from. */
export function withoutExcluded(series: Series): Series {
  const { excluded } = series;
  if (excluded === undefined || !excluded.isExcluded.includes(1)) return series;
  const values = series.values.map((y) => y.map((value, t) => (excluded.isExcluded[t] === 1 ? Number.NaN : value)));
  return { ...series, values };
}

/** Ticks of a span of indices that are not excluded. */
export function ticksLeft({ excluded }: Series, fromIndex: number, toIndex: number): number {
  if (excluded === undefined) return toIndex - fromIndex;
  let left = 0;
  for (let t = fromIndex; t < toIndex; t++) left += 1 - excluded.isExcluded[t];
  return left;
}

/** What a part of a history, and what was remembered before it, says to the part that begins at `fromMs`. */
export function remember(
  history: History,
  site: Site,
  before: readonly Remembered[],
  fromMs: number,
): readonly Remembered[] {
  return site.exclude.map((entry, k) => {
    if ('fromMs' in entry) return { sinceMs: null, stretches: [] };
    const said = saidOf(entry, history, site, before[k]);
    const open = said.at(-1)?.toMs === Number.POSITIVE_INFINITY ? said.pop() : undefined;
    const lasting = said.filter(({ toMs }) => toMs + entry.afterMs > fromMs);
    return { sinceMs: open?.fromMs ?? null, stretches: lasting.map((one) => [one.fromMs, one.toMs] as const) };
  });
}

/** Where an entry holds: its own span, or while its signal says so, wherever that was read. */
function stretchesOf(entry: Exclusion, history: History, site: Site, before?: Remembered): Stretch[] {
  if ('fromMs' in entry) return [{ fromMs: entry.fromMs, toMs: entry.toMs }];
  const { beforeMs, afterMs } = entry;
  return joined(
    saidOf(entry, history, site, before).map(({ fromMs, toMs }) => ({
      fromMs: fromMs - beforeMs,
      toMs: toMs + afterMs,
    })),
  );
}

/** When the signal of an entry said so, what was remembered first. */
function saidOf({ when }: ExcludedWhile, history: History, site: Site, before?: Remembered): Stretch[] {
  const channel = channelsOf(site).findIndex(({ name }) => name === when.signal);
  const earlier = (before?.stretches ?? []).map(([fromMs, toMs]) => ({ fromMs, toMs }));
  return [...earlier, ...saying(history.channels[channel] as ChannelReadings, when, before?.sinceMs ?? Number.NaN)];
}

/** From the first reading that says so to the next that does not; a reading holds until the next. */
function saying({ times, values }: ChannelReadings, { is, level }: ExcludedWhile['when'], sinceMs: number): Stretch[] {
  const order = timeOrder(times);
  const stretches: Stretch[] = [];
  let since = sinceMs;
  for (let n = 0; n < times.length; n++) {
    const i = order === null ? n : (order[n] as number);
    const value = values[i] as number;
    if (Number.isNaN(value)) continue;
    const saysSo = is === 'above' ? value > level : is === 'below' ? value < level : value === level;
    if (saysSo && Number.isNaN(since)) since = times[i] as number;
    if (saysSo || Number.isNaN(since)) continue;
    stretches.push({ fromMs: since, toMs: times[i] as number });
    since = Number.NaN;
  }
  if (!Number.isNaN(since)) stretches.push({ fromMs: since, toMs: Number.POSITIVE_INFINITY });
  return stretches;
}

/** Stretches in order that touch become one. */
function joined(stretches: readonly Stretch[]): Stretch[] {
  const out: Stretch[] = [];
  for (const one of stretches) {
    const last = out.at(-1);
    if (last === undefined || one.fromMs > last.toMs) out.push(one);
    else out[out.length - 1] = { fromMs: last.fromMs, toMs: Math.max(last.toMs, one.toMs) };
  }
  return out;
}

/** The history with the readings in these stretches missing; channels that lose none are shared. */
function withoutReadings(history: History, site: Site, found: readonly Found[]): History {
  const channels = channelsOf(site).map(({ name }, c) => {
    const channel = history.channels[c] as ChannelReadings;
    const own = found.filter(({ entry }) => entry.signals === null || entry.signals.includes(name));
    const stretches = joined(own.flatMap((one) => one.stretches).sort((a, b) => a.fromMs - b.fromMs));
    if (stretches.length === 0) return channel;
    const isIn = membership(stretches);
    return {
      ...channel,
      values: channel.values.map((value, i) => (isIn(channel.times[i] as number) ? Number.NaN : value)),
    };
  });
  return { ...history, channels };
}

/** Whether a time lies in one of the stretches, by bisection. */
function membership(stretches: readonly Stretch[]): (timeMs: number) => boolean {
  return (timeMs) => {
    let low = 0;
    let high = stretches.length;
    while (low < high) {
      const middle = (low + high) >> 1;
      if ((stretches[middle] as Stretch).fromMs <= timeMs) low = middle + 1;
      else high = middle;
    }
    return low > 0 && timeMs < (stretches[low - 1] as Stretch).toMs;
  };
}

/** A tick is touched when any part of it lies in a stretch. */
function marked(found: readonly Found[], series: Series): Series {
  const { ticks, names } = series;
  const isExcluded = new Uint8Array(ticks);
  const values = series.values.map((y, c) =>
    found.some(({ entry }) => entry.signals?.includes(names[c] as string)) ? y.slice() : y,
  );
  const entries = found.map(({ entry, stretches }): ExcludedEntry => {
    const { reason, signals } = entry;
    const touched = new Uint8Array(ticks);
    const inside = stretches.flatMap((stretch) => {
      const [from, to] = touchedBy(stretch, series);
      if (from >= to) return [];
      touched.fill(1, from, to);
      if (signals === null) isExcluded.fill(1, from, to);
      names.forEach((name, c) => {
        if (signals?.includes(name)) values[c]?.fill(Number.NaN, from, to);
      });
      return [{ from, to }];
    });
    return {
      reason,
      signals,
      stretches: inside.length,
      ticks: touched.reduce((sum, flag) => sum + flag, 0),
      fromMs: labelOf(inside[0]?.from, series),
      toMs: labelOf(inside.at(-1)?.to, series),
    };
  });
  return { ...series, values, excluded: { isExcluded, entries } };
}

function touchedBy({ fromMs, toMs }: Stretch, { firstTick, ticks, tickMs }: Series): readonly [number, number] {
  return [Math.max(0, Math.floor(fromMs / tickMs) - firstTick), Math.min(ticks, Math.ceil(toMs / tickMs) - firstTick)];
}

function labelOf(index: number | undefined, { firstTick, tickMs }: Series): number | null {
  return index === undefined ? null : (firstTick + index) * tickMs;
}

/** What was left out and why, in a sentence an entry; for warnings, reports and the terminal. */
export function excludedNotes({ excluded, ticks, tickMs }: Series, hasEarlier = false): string[] {
  return (excluded?.entries ?? []).map(({ reason, signals, stretches, ticks: left, fromMs, toMs }) => {
    const who = signals === null ? 'The whole plant' : signals.join(', ');
    if (fromMs === null || toMs === null) {
      const place = hasEarlier
        ? 'the newest part of this history; what is older is left out where it lies there'
        : 'this history';
      return `${who}: nothing excluded for "${reason}", which lies outside ${place}.`;
    }
    const where = `${stretches === 1 ? '' : `${stretches} times, `}${iso(fromMs)} to ${iso(toMs)}`;
    return `${who}: ${lengthOf(left * tickMs)} (${percent(left / ticks)}) excluded from learning, bounds and judging for "${reason}", ${where}.`;
  });
}

/** Reasons that the provenance names, and characters of each: it must fit a bundle whatever a site file holds. */
const MOST_REASONS = 8;
const LONGEST_REASON = 48;

/** The same in short for the provenance; nothing where the site file excludes nothing. */
export function excludedFacts({ excluded }: Series): Readonly<Record<string, unknown>> {
  if (excluded === undefined) return {};
  const { entries, isExcluded } = excluded;
  const reasons = new Map<string, number>();
  for (const { reason, ticks } of entries) {
    const short = Array.from(reason).slice(0, LONGEST_REASON).join('');
    reasons.set(short, (reasons.get(short) ?? 0) + ticks);
  }
  return {
    excluded: {
      entries: entries.length,
      plantTicks: isExcluded.reduce((sum, flag) => sum + flag, 0),
      ticksByReason: Object.fromEntries([...reasons].slice(0, MOST_REASONS)),
    },
  };
}
