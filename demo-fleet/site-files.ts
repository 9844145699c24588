/**
 * The site files of the demo, as an engineer would write them: where each sensor publishes, how its payload reads, what
 * its limits are. Wells publish {"value", "time"} with ISO times, stores {"v", "t"} with milliseconds.
 */
import {
  AS_SENT,
  defaultWarnRule,
  documentPayload,
  formatSite,
  type PayloadReading,
  type Site,
} from '@stillwell/protocol';
import { columnOf, type LogHabit } from './history-files.ts';
import type { DemoSite } from './plants/sites.ts';

/** Which way a payload is written. */
export type PayloadStyle = 'iso' | 'milliseconds';

const READINGS: Readonly<Record<PayloadStyle, PayloadReading>> = {
  iso: documentPayload('json', '/value', '/time'),
  milliseconds: documentPayload('json', '/v', '/t'),
};

/** A reading as its payload. */
export function payloadOf(style: PayloadStyle, value: number, timeMs: number): string {
  return style === 'iso'
    ? JSON.stringify({ value, time: new Date(timeMs).toISOString() })
    : JSON.stringify({ v: value, t: timeMs });
}

/** Topic on which a channel's readings are published. */
export const readingTopic = (site: string, channel: string): string => `plant/${site}/${channel}`;

/** Topic on which the plan of an input is published. */
export const planTopic = (site: string, channel: string): string => `plan/${site}/${channel}`;

/** Payload style of a demo site. */
export const styleOf = (site: DemoSite): PayloadStyle => (site.kind === 'wet-well' ? 'iso' : 'milliseconds');

/** Ticks after its end that a tick waits for stragglers. */
export const LATENESS_TICKS = 2;

/** One channel of any site the demo makes. */
export interface SiteChannel {
  readonly name: string;
  readonly role: 'signal' | 'input';
  readonly unit: string;
  readonly resolution: number | null;
  readonly range: readonly [number, number] | null;
  readonly limits: { readonly high?: number; readonly highHigh?: number; readonly low?: number };
  readonly aggregate: 'last' | 'sum';
  readonly isPlanned?: boolean;
  readonly column: string;
}

/** Everything a site file needs. */
export interface SiteDescription {
  readonly name: string;
  readonly equipmentClass: string;
  readonly timeZone: string;
  readonly tickMs: number;
  readonly horizon: number;
  readonly style: PayloadStyle;
  readonly channels: readonly SiteChannel[];
}

/** The description of a plant site under a logging habit. */
export function describeSite(site: DemoSite, habit: LogHabit): SiteDescription {
  return {
    name: site.name,
    equipmentClass: site.kind,
    timeZone: site.timeZone,
    tickMs: site.design.tickMs,
    horizon: site.horizon,
    style: styleOf(site),
    channels: site.channels.map((channel) => ({ ...channel, column: columnOf(habit, channel) })),
  };
}

/** The site file as text. */
export function siteText(description: SiteDescription): string {
  const channel = (one: SiteChannel): Site['signals'][number] => ({
    name: one.name,
    topic: readingTopic(description.name, one.name),
    payload: READINGS[description.style],
    unit: one.unit,
    ...AS_SENT,
    resolution: one.resolution,
    range: one.range,
    aggregate: one.aggregate,
    limits: {
      highHigh: one.limits.highHigh ?? null,
      high: one.limits.high ?? null,
      low: one.limits.low ?? null,
      lowLow: null,
    },
    warn: null,
    column: one.column,
  });
  const of = (role: 'signal' | 'input'): SiteChannel[] => description.channels.filter((one) => one.role === role);
  return formatSite({
    site: description.name,
    equipmentClass: description.equipmentClass,
    timeZone: description.timeZone,
    tickMs: description.tickMs,
    horizon: description.horizon,
    latenessMs: LATENESS_TICKS * description.tickMs,
    root: 'stillwell',
    residualBytesPerDay: 1_000_000,
    warn: defaultWarnRule(description.horizon),
    signals: of('signal').map(channel),
    inputs: of('input').map((one) => ({
      ...channel(one),
      planTopic: one.isPlanned ? planTopic(description.name, one.name) : null,
    })),
    calendar: { timeOfDay: true, dayOfWeek: false, holidays: [] },
    exclude: [],
  });
}
