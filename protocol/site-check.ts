/**
 * What the keys of a site file must be to each other, once each is right by itself.
 */
import { formatDuration } from './duration.ts';
import type { Fault } from './issue.ts';
import { MAX_CHANNELS, MAX_HORIZON } from './limits.ts';
import type { Limits, Signal, Site } from './site.ts';
import { conversionFaults } from './site-conversion-check.ts';
import { warnFaults } from './site-warn.ts';

const fault = (path: readonly PropertyKey[], text: string): Fault => ({ path, isUnknownKey: false, text });

/** Limits from the lowest up, with their keys in the file. */
const LADDER: readonly (readonly [keyof Limits, string])[] = [
  ['lowLow', 'low_low'],
  ['low', 'low'],
  ['high', 'high'],
  ['highHigh', 'high_high'],
];

const limitFaults = (signal: Signal, path: readonly PropertyKey[]): Fault[] => {
  const set = LADDER.flatMap(([field, key]) => {
    const value = signal.limits[field];
    return value === null ? [] : [{ key, value }];
  });
  const faults: Fault[] = [];
  for (const [i, { key, value }] of set.entries()) {
    const below = set[i - 1];
    if (below !== undefined && value <= below.value) {
      faults.push(
        fault([...path, 'limits', key], `expected a level above ${below.key} (${below.value}), got ${value}`),
      );
    }
    const range = signal.range;
    if (range !== null && (value < range[0] || value > range[1])) {
      const text = `expected a level within the range [${range[0]}, ${range[1]}], got ${value}: readings beyond the range are refused`;
      faults.push(fault([...path, 'limits', key], text));
    }
  }
  return faults;
};

interface Entry {
  readonly signal: Signal;
  readonly path: readonly PropertyKey[];
}

const entriesOf = (site: Site): readonly Entry[] => [
  ...site.signals.map((signal, i) => ({ signal, path: ['signals', i] })),
  ...site.inputs.map((signal, i) => ({ signal, path: ['inputs', i] })),
];

const label = (path: readonly PropertyKey[]): string => `${String(path[0])}[${String(path[1])}]`;

const repeatFaults = (entries: readonly Entry[]): Fault[] => {
  const names = new Map<string, Entry>();
  const readings = new Map<string, Entry>();
  const faults: Fault[] = [];
  for (const entry of entries) {
    const { signal, path } = entry;
    const sameName = names.get(signal.name);
    if (sameName !== undefined) {
      faults.push(
        fault([...path, 'name'], `expected a name of its own, got "${signal.name}", which is ${label(sameName.path)}`),
      );
    }
    names.set(signal.name, sameName ?? entry);
    if (signal.topic === null) continue;
    const reading = JSON.stringify([signal.topic, signal.payload, signal.aggregate]);
    const same = readings.get(reading);
    if (same !== undefined) {
      const text = `expected a reading of its own, got the same topic, payload and aggregate as ${label(same.path)} ("${same.signal.name}")`;
      faults.push(fault([...path, 'topic'], text));
    }
    readings.set(reading, same ?? entry);
  }
  return faults;
};

const horizonFaults = (site: Site): Fault[] => {
  if (Number.isInteger(site.horizon) && site.horizon >= 1 && site.horizon <= MAX_HORIZON) return [];
  const got = Number.isInteger(site.horizon)
    ? `${site.horizon} ticks`
    : `${formatDuration(Math.round(site.horizon * site.tickMs))}, which the tick of ${formatDuration(site.tickMs)} does not divide`;
  return [fault(['horizon'], `expected 1 to ${MAX_HORIZON} whole ticks of ${formatDuration(site.tickMs)}, got ${got}`)];
};

/** A plan read as a reading, or the other way round, would be refused message by message; better once, here. */
const planFaults = (site: Site): readonly Fault[] => {
  const plans = new Map<string, number>();
  return site.inputs.flatMap(({ name, topic, planTopic }, i): Fault[] => {
    if (planTopic === null) return [];
    const path = ['inputs', i, 'plan_topic'];
    const same = plans.get(planTopic);
    plans.set(planTopic, same ?? i);
    if (planTopic === topic)
      return [fault(path, `expected another topic than that of the readings of "${name}", got the same`)];
    if (same === undefined) return [];
    return [fault(path, `expected a topic of its own, got that of inputs[${same}] ("${site.inputs[same]!.name}")`)];
  });
};

/** Lists what does not fit together in a site: horizon and tick, repeated names and readings, plan topics, rules of
 * warnings, order of limits. */
export const crossFaults = (site: Site): readonly Fault[] => {
  const entries = entriesOf(site);
  const faults = [...horizonFaults(site), ...repeatFaults(entries), ...planFaults(site), ...warnFaults(site)];
  for (const { signal, path } of entries) faults.push(...limitFaults(signal, path), ...conversionFaults(signal, path));
  if (entries.length > MAX_CHANNELS) {
    faults.push(
      fault(['inputs'], `expected at most ${MAX_CHANNELS} signals and inputs together, got ${entries.length}`),
    );
  }
  return faults;
};
