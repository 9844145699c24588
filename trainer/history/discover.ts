/**
 * Which signals history files hold, before any site file names them: the columns with numbers of wide files, the names in
 * long ones, the topics of captured messages with the members of their payloads.
 */
import { documentPayload, MAX_CHANNELS, type PayloadReading, toName } from '@stillwell/protocol';
import { TrainError } from '../errors.ts';
import { payloadOf, topicOf } from './capture.ts';
import { ColumnsEngine } from './columns-engine.ts';
import { longColumns, readHeader, timeColumn } from './csv-header.ts';
import { discoverColumns } from './discover-columns.ts';
import { findFiles } from './find-files.ts';
import { findFormat } from './format.ts';
import { inspectFile, readBlocks } from './input-file.ts';
import { LineObjects } from './ndjson.ts';
import { numberOfText } from './numbers.ts';
import { RecordScanner, type RecordView } from './records.ts';
import { splitHeading } from './unit-label.ts';

/** A signal as the files name it. */
export interface Discovered {
  readonly name: string;
  readonly column: string;
  readonly unit: string;
  /** Topic of a captured signal; null for files without topics. */
  readonly topic: string | null;
  readonly payload: PayloadReading;
}

const NUMBER: PayloadReading = { kind: 'number' };
const TIME_MEMBER = /^(time|timestamp|ts|t|date)$/i;
const DECIMAL_COMMA = /^[+-]?\d+,\d+$/;

/** What a first field tells of its column: 'number', 'text', or nothing yet. */
function judge(text: string): 'number' | 'text' | null {
  const value = numberOfText(text);
  if (Number.isNaN(value)) return null;
  return Number.isFinite(value) || DECIMAL_COMMA.test(text.trim()) ? 'number' : 'text';
}

/** Columns of numbers, told by the first field of each that holds anything. */
class HeadingScan {
  readonly found = new Map<string, 'number' | 'text' | null>();
  #names: readonly string[] = [];
  #time = 0;
  readonly #path: string;

  constructor(path: string) {
    this.#path = path;
  }

  take(record: RecordView): void {
    if (this.#names.length === 0) {
      this.#names = readHeader(this.#path, record);
      this.#time = timeColumn(this.#names);
      this.#names.forEach((name, index) => {
        if (index !== this.#time) this.found.set(name, null);
      });
      return;
    }
    this.#names.forEach((name, index) => {
      if (index !== this.#time && index < record.count && this.found.get(name) === null)
        this.found.set(name, judge(record.text(index)));
    });
  }

  get isDone(): boolean {
    return [...this.found.values()].every((kind) => kind !== null);
  }
}

/** Topics and, for JSON objects, their numeric members. */
class TopicScan {
  readonly found = new Map<string, { topic: string; payload: PayloadReading }>();
  readonly #seen = new Set<string>();

  take(path: string, line: Readonly<Record<string, unknown>>, number: number): void {
    const topic = topicOf(path, line, number);
    if (this.#seen.has(topic)) return;
    this.#seen.add(topic);
    const text = Buffer.from(payloadOf(path, line, number)).toString('utf8');
    if (Number.isFinite(numberOfText(text))) {
      this.found.set(topic, { topic, payload: NUMBER });
      return;
    }
    let members: unknown;
    try {
      members = JSON.parse(text);
    } catch {
      return;
    }
    if (typeof members !== 'object' || members === null || Array.isArray(members)) return;
    const entries = Object.entries(members);
    const time = entries.find(([key]) => TIME_MEMBER.test(key))?.[0];
    for (const [key, value] of entries) {
      if (typeof value !== 'number' || key === time) continue;
      this.found.set(`${topic} ${key}`, {
        topic,
        payload: documentPayload('json', pointerTo(key), time === undefined ? null : pointerTo(time)),
      });
    }
  }
}

/** RFC 6901 section 3: ~ and / are written ~0 and ~1. */
function pointerTo(key: string): string {
  return `/${key.replaceAll('~', '~0').replaceAll('/', '~1')}`;
}

/** Names made of labels, each once. */
function distinct(labels: readonly string[]): string[] {
  const used = new Set<string>();
  return labels.map((label) => {
    const name = toName(label);
    let free = name;
    for (let n = 2; used.has(free); n++) free = `${name}_${n}`;
    used.add(free);
    return free;
  });
}

/** What one file adds. */
interface Scans {
  readonly columns: Map<string, 'number' | 'text' | null>;
  readonly topics: TopicScan;
}

async function scanFile(path: string, scans: Scans, engine: ColumnsEngine): Promise<void> {
  const file = inspectFile(path);
  if (file.kind === 'Parquet') {
    for (const [name, kind] of await discoverColumns(path, engine))
      if ((scans.columns.get(name) ?? null) === null) scans.columns.set(name, kind);
    return;
  }
  const blocks = readBlocks(file, () => {});
  let push: ((block: Buffer) => void) | null = null;
  let isDone = (): boolean => false;
  const note = (name: string, text: string): void => {
    if ((scans.columns.get(name) ?? null) === null) scans.columns.set(name, judge(text));
  };
  const headings = new HeadingScan(path);
  for await (const block of blocks) {
    if (push === null) {
      const format = findFormat(path, block);
      if (format.kind === 'wide CSV') {
        const scanner = new RecordScanner(path, format.separator, 1, (record) => headings.take(record));
        push = (bytes) => scanner.push(bytes);
        isDone = () => headings.isDone;
      } else if (format.kind === 'long CSV') {
        const columns = longColumns(format.header) as { signal: number; value: number };
        const scanner = new RecordScanner(path, format.separator, 1, (record) => {
          if (record.line > 1 && record.count > Math.max(columns.signal, columns.value))
            note(record.text(columns.signal), record.text(columns.value));
        });
        push = (bytes) => scanner.push(bytes);
      } else {
        const isCapture = format.kind === 'MQTT capture';
        const lines = new LineObjects(path, (line, number) => {
          if (isCapture) scans.topics.take(path, line, number);
          else if (typeof line.signal === 'string') note(line.signal, String(line.value));
        });
        push = (bytes) => lines.push(bytes);
      }
    }
    push(block);
    if (isDone()) break;
  }
  for (const [name, kind] of headings.found)
    if (kind !== null || !scans.columns.has(name)) scans.columns.set(name, kind);
}

/** A label for a topic's signal: the topic's levels from the first that tells topics apart, and the member. */
function topicLabels(found: readonly { topic: string; payload: PayloadReading }[]): string[] {
  if (found.length === 0) return [];
  const split = found.map(({ topic }) => topic.split('/'));
  const depth = Math.min(...split.map((levels) => levels.length));
  let common = 0;
  while (common < depth - 1 && split.every((levels) => levels[common] === split[0]?.[common])) common++;
  return found.map(({ payload }, index) => {
    const levels = (split[index] as string[]).slice(common).join('_');
    const isMember = 'value' in payload && payload.value !== '/value';
    return isMember ? `${levels}_${payload.value.slice(1)}` : levels;
  });
}

/**
 * Signals in the files, in the order of their columns; columns of text are left out.
 *
 * throws  TrainError 'file' or 'history' where a file cannot be read, or holds no column of numbers at all
 */
export async function discoverSignals(paths: readonly string[]): Promise<Discovered[]> {
  const scans: Scans = { columns: new Map(), topics: new TopicScan() };
  const files = findFiles(paths, null);
  const engine = new ColumnsEngine();
  try {
    for (const path of files) await scanFile(path, scans, engine);
  } finally {
    engine.close();
  }
  const columns = [...scans.columns].filter(([, kind]) => kind === 'number').map(([name]) => name);
  const topics = [...scans.topics.found.values()];
  const headings = columns.map(splitHeading);
  const names = distinct([...headings.map(({ label }) => label), ...topicLabels(topics)]);
  const found = [
    ...columns.map((column, i) => ({
      name: names[i] as string,
      column,
      unit: headings[i]?.unit ?? '1',
      topic: null,
      payload: NUMBER,
    })),
    ...topics.map(({ topic, payload }, i) => {
      const name = names[columns.length + i] as string;
      return { name, column: name, unit: '1', topic, payload };
    }),
  ];
  if (found.length === 0)
    throw new TrainError(
      'history',
      `${files.join(', ')}: expected at least one column of numbers, got none; check that this is the right file`,
    );
  if (found.length > MAX_CHANNELS)
    throw new TrainError(
      'history',
      `${files.join(', ')}: expected at most ${MAX_CHANNELS} signals, got ${found.length}; take fewer columns, or write the site file by hand`,
    );
  return found;
}
