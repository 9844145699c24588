/**
 * Captured MQTT messages: {"time", "topic", "payload"[, "encoding": "base64"]} a line, `time` of arrival. Each is read as
 * the gateway would read it, by the site file's topics and payload mapping, so that what is learned is what will be seen.
 * A payload the mapping cannot read is counted, not refused: on a live broker such things come.
 */
import { MessageDecoder, type PayloadReason, type ReadingTarget, type Signal } from '@stillwell/protocol';
import { type FileAccount, type FileReader, type ReaderState, tally } from './file-reader.ts';
import type { Gathering } from './gathering.ts';
import { readMemberTime } from './long-ndjson.ts';
import { LineObjects, shownMember } from './ndjson.ts';
import { refusal } from './refusal.ts';
import type { TimeReader } from './times.ts';

/** Payload bytes of a captured line. */
export function payloadOf(path: string, line: Readonly<Record<string, unknown>>, number: number): Uint8Array {
  const { payload, encoding } = line;
  if (encoding !== undefined && encoding !== 'base64')
    throw refusal(
      { file: path, line: number, field: 'encoding' },
      '"base64" or nothing',
      shownMember(encoding),
      'capture payloads as text or base64',
    );
  if (payload === undefined)
    throw refusal(
      { file: path, line: number, field: 'payload' },
      'the payload as text',
      'nothing',
      'mend or drop this line',
    );
  if (typeof payload !== 'string') return Buffer.from(JSON.stringify(payload));
  if (encoding !== 'base64') return Buffer.from(payload);
  const bytes = Buffer.from(payload, 'base64');
  if (bytes.toString('base64').replace(/=+$/, '') !== payload.replace(/=+$/, ''))
    throw refusal(
      { file: path, line: number, field: 'payload' },
      'base64 (RFC 4648)',
      shownMember(payload),
      'mend or drop this line',
    );
  return bytes;
}

/** Topic of a captured line. */
export function topicOf(path: string, line: Readonly<Record<string, unknown>>, number: number): string {
  const { topic } = line;
  if (typeof topic === 'string' && topic !== '') return topic;
  throw refusal({ file: path, line: number, field: 'topic' }, 'a topic', shownMember(topic), 'mend or drop this line');
}

/** Reads one file of captured messages. */
export class CaptureReader implements FileReader {
  readonly #path: string;
  readonly #signals: readonly Signal[];
  readonly #gathering: Gathering;
  readonly #times: TimeReader;
  readonly #lines: LineObjects;
  readonly #decoder: MessageDecoder;
  /** Of the line being read. */
  #line = 0;
  readonly #target: ReadingTarget = {
    take: (channel, value, timeMs) =>
      this.#gathering.add(channel, Number.isNaN(timeMs) ? this.#arrivedMs : timeMs, value, this.#line),
    refuse: (channel, reason) =>
      tally(this.#passedOver, passedOverBecause((this.#signals[channel] as Signal).name, reason)),
  };
  readonly #passedOver: Record<string, number> = {};
  readonly #ignored = new Set<string>();
  #arrivedMs = Number.NEGATIVE_INFINITY;
  rows = 0;

  /** signals  by channel */
  constructor(path: string, signals: readonly Signal[], gathering: Gathering, times: TimeReader) {
    this.#path = path;
    this.#signals = signals;
    this.#gathering = gathering;
    this.#decoder = new MessageDecoder(signals);
    this.#times = times;
    this.#lines = new LineObjects(path, (line, number) => this.#message(line, number));
  }

  push(block: Buffer): void {
    this.#lines.push(block);
  }

  end(): FileAccount {
    return {
      format: 'MQTT capture',
      separator: null,
      rows: this.rows,
      columnsIgnored: [...this.#ignored].sort(),
      missingMarks: {},
      passedOver: this.#passedOver,
    };
  }

  state(): ReaderState {
    return {
      ...{ rest: 0, line: this.#lines.number, rows: this.rows, names: [], missingMarks: {} },
      ...{ ignored: [...this.#ignored], passedOver: this.#passedOver, arrivedMs: this.#arrivedMs },
      births: this.#decoder.sparkplug?.save() ?? [],
    };
  }

  restore(state: ReaderState): void {
    this.#lines.number = state.line;
    this.rows = state.rows;
    Object.assign(this.#passedOver, state.passedOver);
    for (const topic of state.ignored ?? []) this.#ignored.add(topic);
    this.#arrivedMs = state.arrivedMs ?? Number.NEGATIVE_INFINITY;
    this.#decoder.sparkplug?.restore(state.births ?? []);
  }

  #message(line: Readonly<Record<string, unknown>>, number: number): void {
    this.rows++;
    const topic = topicOf(this.#path, line, number);
    const arrivedMs = readMemberTime(this.#path, number, line.time, this.#times, this.#arrivedMs);
    this.#arrivedMs = arrivedMs;
    const payload = payloadOf(this.#path, line, number);
    this.#line = number;
    if (!this.#decoder.decode(topic, payload, this.#target)) this.#ignored.add(topic);
  }
}

function passedOverBecause(name: string, reason: PayloadReason): string {
  if (reason === 'quality') return `payload of ${name} not of good quality`;
  return reason === 'unborn'
    ? `payload of ${name} before the birth that explains it`
    : `payload of ${name} not readable`;
}
