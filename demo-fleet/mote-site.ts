/**
 * One mote of the measured data as a site: two signals, a tick a reading. One site a mote, since nothing in the data says
 * that reading n of one mote was taken at the moment of reading n of another.
 */
import { mkdirSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import type { TickTraffic } from './faults.ts';
import type { ReadingSource } from './play.ts';
import { CADENCE_MS, FIRST_READING_MS, type Mote } from './sensor-network.ts';
import { type SiteDescription, siteText } from './site-files.ts';

/** Share of the readings that are learned from; both spells of labelled events lie in it. */
export const LEARN_SHARE = 0.65;
/** Furthest step: five minutes. */
export const MOTE_HORIZON = 60;

/** Channels in order: temperature, humidity. Resolution and lattice are left to be found in the history. */
const CHANNELS = [
  { name: 'temperature', unit: 'Cel', range: [-40, 124] },
  { name: 'humidity', unit: '%', range: [0, 100] },
] as const;

/** First tick of the record, absolute. */
export const FIRST_TICK = FIRST_READING_MS / CADENCE_MS;

/** Name of a mote's site. */
export const moteName = (mote: Mote): string => `mote-${mote.id}`;

/** Readings that are learned from. */
export const learnCount = (mote: Mote): number => Math.floor(LEARN_SHARE * mote.temperature.length);

/** The site file's facts. */
export function describeMote(mote: Mote): SiteDescription {
  return {
    name: moteName(mote),
    equipmentClass: mote.isIndoor ? 'indoor-mote' : 'outdoor-mote',
    timeZone: 'UTC',
    tickMs: CADENCE_MS,
    horizon: MOTE_HORIZON,
    style: 'iso',
    channels: CHANNELS.map((channel) => ({
      ...channel,
      role: 'signal',
      resolution: null,
      limits: {},
      aggregate: 'last',
      column: channel.name,
    })),
  };
}

/** Readings `from` up to `to` as a wide CSV file in `folder`; gives its path. */
export function writeMoteHistory(folder: string, mote: Mote, from: number, to: number, file: string): string {
  mkdirSync(folder, { recursive: true });
  const lines = ['time,temperature,humidity'];
  for (let k = from; k < to; k++)
    lines.push(
      `${new Date(FIRST_READING_MS + k * CADENCE_MS).toISOString()},${mote.temperature[k]},${mote.humidity[k]}`,
    );
  const path = join(folder, file);
  writeFileSync(path, `${lines.join('\n')}\n`);
  return path;
}

/** Writes the site file into `folder`; gives its path. */
export function writeMoteSite(folder: string, mote: Mote): string {
  mkdirSync(folder, { recursive: true });
  const path = join(folder, 'site.yaml');
  writeFileSync(path, siteText(describeMote(mote)));
  return path;
}

/** The record as readings to play, tick by tick. */
export function moteSource(mote: Mote): ReadingSource {
  return {
    next: (tick): TickTraffic => {
      const k = tick - FIRST_TICK;
      const said = moteReadings(mote, k);
      const timeMs = FIRST_READING_MS + k * CADENCE_MS;
      return { said, messages: Array.from(said, (value, channel) => ({ channel, timeMs, value })) };
    },
    drain: () => [],
  };
}

/** Reading k of a mote, channels in order. */
export function moteReadings(mote: Mote, k: number): Float64Array {
  return Float64Array.of(mote.temperature[k], mote.humidity[k]);
}
