/**
 * The site file: one YAML document a site, read by the trainer and by the gateway alike.
 */
import { type Document, isAlias, isMap, isNode, isScalar, isSeq, LineCounter, parseDocument } from 'yaml';
import { ProtocolError } from './errors.ts';
import { deepFreeze } from './freeze.ts';
import { type Fault, formatFault, listFaults } from './issue.ts';
import { MAX_SITE_FILE_BYTES } from './limits.ts';
import { formatPath } from './path.ts';
import { crossFaults } from './site-check.ts';
import { type Exclusion, excludeFaults, toExclusion } from './site-exclude.ts';
import { type SiteFile, siteFileKeys, siteFileSchema } from './site-schema.ts';

/** How a tick makes one value of the readings that fall into it. */
export type Aggregate = 'last' | 'mean' | 'min' | 'max' | 'sum' | 'increment';

/** How a reading is taken out of an MQTT payload; pointers are RFC 6901, times ISO 8601 with zone or ms since 1970. */
export type PayloadReading =
  | { readonly kind: 'number' }
  | { readonly kind: 'json' | 'msgpack'; readonly value: string; readonly time: string | null };

/** Levels that operators care about, in the signal's unit; null where none is set. */
export interface Limits {
  readonly highHigh: number | null;
  readonly high: number | null;
  readonly low: number | null;
  readonly lowLow: number | null;
}

/** A measured quantity of the site. */
export interface Signal {
  readonly name: string;
  /** MQTT topic filter of its readings; null when the site is only fitted, not run. */
  readonly topic: string | null;
  readonly payload: PayloadReading;
  /** UCUM code; '1' where dimensionless. */
  readonly unit: string;
  /** Smallest step of the sensor in `unit`; null: found in the history. */
  readonly resolution: number | null;
  /** Physically possible values in `unit`; readings outside are refused. */
  readonly range: readonly [number, number] | null;
  readonly aggregate: Aggregate;
  readonly limits: Limits;
  /** Column of wide history files, or value of the signal column of long ones; the name unless said otherwise. */
  readonly column: string;
}

/** A known cause; its plan is its values ahead of now. */
export interface Input extends Signal {
  readonly planTopic: string | null;
}

/** What of the calendar the plant follows. */
export interface Calendar {
  readonly timeOfDay: boolean;
  readonly dayOfWeek: boolean;
  /** ISO dates, local to the site's time zone. */
  readonly holidays: readonly string[];
}

/** A checked site file, every default filled in. */
export interface Site {
  readonly site: string;
  readonly equipmentClass: string;
  /** IANA time zone: for people and calendar; also of history times that carry no zone when `historyZone` is null. */
  readonly timeZone: string;
  readonly tickMs: number;
  /** Furthest forecast step, in ticks. */
  readonly horizon: number;
  readonly latenessMs: number;
  /** First level of every topic of ours. */
  readonly root: string;
  readonly residualBytesPerDay: number;
  readonly signals: readonly Signal[];
  readonly inputs: readonly Input[];
  readonly calendar: Calendar;
  /** Time that must not teach; for the trainer alone. */
  readonly exclude: readonly Exclusion[];
}

/** First topic level of ours unless the site file says otherwise. */
export const DEFAULT_ROOT = 'stillwell';
/** Residual bytes a day unless the site file says otherwise: under 3 MB a month, within the smallest metered plans. */
export const DEFAULT_RESIDUAL_BYTES_PER_DAY = 100_000;
/** Longest default lateness; field buses and local brokers deliver within it (common practice). */
const MOST_DEFAULT_LATENESS_MS = 10_000;

const NO_LIMITS: Limits = Object.freeze({ highHigh: null, high: null, low: null, lowLow: null });

type SignalEntry = SiteFile['signals'][number];

const toLimits = (limits: SignalEntry['limits']): Limits => {
  if (limits === undefined || limits === null) return NO_LIMITS;
  return {
    highHigh: limits.high_high ?? null,
    high: limits.high ?? null,
    low: limits.low ?? null,
    lowLow: limits.low_low ?? null,
  };
};

const toSignal = (entry: SignalEntry, aggregate: Aggregate): Signal => ({
  name: entry.name,
  topic: entry.topic ?? null,
  payload: entry.payload ?? { kind: 'number' },
  unit: entry.unit ?? '1',
  resolution: entry.resolution ?? null,
  range: entry.range ?? null,
  aggregate: entry.aggregate ?? aggregate,
  limits: toLimits(entry.limits),
  column: entry.column ?? entry.name,
});

const toSite = (file: SiteFile): Site => ({
  site: file.site,
  equipmentClass: file.class ?? 'general',
  timeZone: file.time_zone,
  tickMs: file.tick,
  horizon: 'ticks' in file.horizon ? file.horizon.ticks : file.horizon.ms / file.tick,
  latenessMs: file.lateness ?? Math.min(Math.ceil(file.tick / 10), MOST_DEFAULT_LATENESS_MS),
  root: file.root ?? DEFAULT_ROOT,
  residualBytesPerDay: file.residual_budget ?? DEFAULT_RESIDUAL_BYTES_PER_DAY,
  signals: file.signals.map((entry) => toSignal(entry, 'mean')),
  inputs: (file.inputs ?? []).map((entry) => ({ ...toSignal(entry, 'last'), planTopic: entry.plan_topic ?? null })),
  calendar: {
    timeOfDay: file.calendar?.time_of_day ?? true,
    dayOfWeek: file.calendar?.day_of_week ?? true,
    holidays: file.calendar?.holidays ?? [],
  },
  exclude: (file.exclude ?? []).map(toExclusion),
});

const fileFault = (fileName: string, lines: LineCounter, offset: number, text: string, path = ''): ProtocolError => {
  const { line, col } = lines.linePos(offset);
  return new ProtocolError('site-file', `${fileName}:${line}:${col}: ${text}`, {
    details: { fileName, line, col, path },
  });
};

/** What the YAML reader's own codes mean to a person; its message where there is no better one. */
const yamlText = (error: { code: string; message: string }): string => {
  if (error.code === 'DUPLICATE_KEY') return 'this key appears twice in the same map; keep one';
  if (error.code === 'TAB_AS_INDENT') return 'expected spaces for indentation, got a tab';
  if (error.code === 'MULTIPLE_DOCS') return 'expected one YAML document, got several; remove the "---" line';
  if (error.message.includes('call stack')) return 'expected a few levels of nesting, got too many to read';
  return `not valid YAML: ${error.message}`;
};

const readYaml = (text: string, fileName: string, lines: LineCounter): Document.Parsed => {
  const document = parseDocument(text, { lineCounter: lines, prettyErrors: false, schema: 'core', version: '1.2' });
  const problem = document.errors[0] ?? document.warnings[0];
  if (problem !== undefined) throw fileFault(fileName, lines, problem.pos[0], yamlText(problem));
  if (document.contents === null) {
    throw fileFault(
      fileName,
      lines,
      0,
      'expected a site file with the keys site, time_zone, tick, horizon and signals, got an empty file',
    );
  }
  return document;
};

const toPlain = (document: Document.Parsed, fileName: string, lines: LineCounter): unknown => {
  try {
    return document.toJS();
  } catch (error) {
    throw fileFault(fileName, lines, 0, `not usable YAML: ${(error as Error).message}`);
  }
};

/** Offset of the value a path names, of its key for an unknown one, or of the nearest map around a missing one. */
const offsetOf = (document: Document.Parsed, fault: Fault): number => {
  let node: unknown = document.contents;
  let offset = document.contents?.range[0] ?? 0;
  for (const [depth, step] of fault.path.entries()) {
    if (isAlias(node)) node = node.resolve(document);
    if (isMap(node)) {
      const pair = node.items.find((item) => isScalar(item.key) && String(item.key.value) === String(step));
      if (pair === undefined || !isScalar(pair.key)) return offset;
      const isKey = (fault.isUnknownKey && depth === fault.path.length - 1) || !isNode(pair.value);
      offset = (isKey ? pair.key.range?.[0] : (pair.value as { range?: number[] }).range?.[0]) ?? offset;
      node = pair.value;
    } else if (isSeq(node)) {
      node = node.items[Number(step)];
      if (!isNode(node)) return offset;
      offset = node.range?.[0] ?? offset;
    } else return offset;
  }
  return offset;
};

/**
 * Reads and checks a site file.
 *
 * units   durations come out in ms; limits, range and resolution in the signal's unit
 * throws  ProtocolError 'site-file': "file:line:col: path: expected …, got …", with a suggestion for a mistyped key
 */
export const parseSite = (text: string, fileName = 'site file'): Site => {
  const lines = new LineCounter();
  if (Buffer.byteLength(text) > MAX_SITE_FILE_BYTES) {
    throw new ProtocolError(
      'site-file',
      `${fileName}: expected a site file of at most ${MAX_SITE_FILE_BYTES} bytes, got ${Buffer.byteLength(text)}; check that it is the right file`,
      { details: { fileName } },
    );
  }
  const document = readYaml(text, fileName, lines);
  const plain = toPlain(document, fileName, lines);
  const parsed = siteFileSchema.safeParse(plain);
  if (!parsed.success) throw siteFault(fileName, lines, document, listFaults(parsed.error, plain, siteFileKeys));
  const { signals, inputs, exclude } = parsed.data;
  const names = [...signals, ...(inputs ?? [])].map((entry) => entry.name);
  const misfits = excludeFaults(exclude ?? [], names);
  if (misfits.length > 0) throw siteFault(fileName, lines, document, misfits);
  const site = toSite(parsed.data);
  const faults = crossFaults(site);
  if (faults.length > 0) throw siteFault(fileName, lines, document, faults);
  return deepFreeze(site);
};

const siteFault = (
  fileName: string,
  lines: LineCounter,
  document: Document.Parsed,
  faults: readonly Fault[],
): ProtocolError => {
  const first = faults[0]!;
  const more = faults.length > 1 ? ` (and ${faults.length - 1} more)` : '';
  return fileFault(fileName, lines, offsetOf(document, first), `${formatFault(first)}${more}`, formatPath(first.path));
};
