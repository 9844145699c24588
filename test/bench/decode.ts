/**
 * What one reading costs from the message's bytes to a number of its channel: bare, eight signals in one JSON frame, eight
 * Sparkplug metrics by alias. Beside them the same as one writes it first: text and document anew for each signal, and
 * sparkplug-payload (npm, generated from the standard's message definition), which gives a whole message as objects.
 * Ours and peer take turns; the least processor time of the turns counts.
 */
import { createRequire } from 'node:module';
import { AS_SENT, documentPayload, MessageDecoder, type PayloadReading, type ReadingTarget } from '@stillwell/protocol';
import { type BenchOptions, isWanted, type Row, row } from './harness.ts';

const SIGNALS = 8;
const MESSAGES = 40_000;
const TURNS = 7;
const TOPIC = 'plc/frame';
const DEVICE = 'edge-1/pumps';
const AT = Date.UTC(2026, 2, 1);

interface Codec {
  encodePayload(payload: object): Uint8Array;
  decodePayload(bytes: Uint8Array): { metrics: { alias: unknown; value: number; timestamp: unknown }[] };
}

/** Rows of decoding. */
export function* decodeRows(options: BenchOptions): Iterable<Row> {
  if (!isWanted(options, 'decode')) return;
  yield numberRow();
  yield frameRow();
  yield sparkplugRow();
}

let sum = 0;
const target: ReadingTarget = {
  take: (channel, value, timeMs) => {
    sum += channel + value + (timeMs > 0 ? 1 : 0);
  },
  refuse: (_, reason) => {
    throw new Error(`the bench's own message was refused: ${reason}`);
  },
};

/** A decoder of the signals that read so many payloads from one topic. */
const decoderOf = (topic: string, payloads: readonly PayloadReading[]): MessageDecoder =>
  new MessageDecoder(payloads.map((payload) => ({ topic, payload, unit: '1', ...AS_SENT })));

/** Least microseconds of processor a reading, ours and the peer's in turns. */
function compare(readings: number, ours: () => void, peer: () => void): { ours: number; peer: number } {
  const least = { ours: Number.POSITIVE_INFINITY, peer: Number.POSITIVE_INFINITY };
  for (let turn = 0; turn < TURNS; turn++)
    for (const [name, work] of [
      ['ours', ours],
      ['peer', peer],
    ] as const) {
      const before = process.cpuUsage();
      for (let n = 0; n < MESSAGES; n++) work();
      const { user, system } = process.cpuUsage(before);
      least[name] = Math.min(least[name], (user + system) / (MESSAGES * readings));
    }
  if (!Number.isFinite(sum)) throw new Error('the bench read no numbers');
  return least;
}

const rowOf = (name: string, cost: { ours: number; peer: number }, peerName: string): Row =>
  row({ suite: 'gateway', case: name, unit: 'µs/reading', ...cost, peerName, better: 'lower' });

function numberRow(): Row {
  const payload = Buffer.from('21.507');
  const decoder = decoderOf(TOPIC, [{ kind: 'number' }]);
  const peer = (): void =>
    target.take(0, Number(new TextDecoder('utf-8', { fatal: true }).decode(payload)), Number.NaN);
  const cost = compare(1, () => decoder.decode(TOPIC, payload, target), peer);
  return rowOf('decode a bare number', cost, 'text decoder and Number');
}

function frameRow(): Row {
  const keys = Array.from({ length: SIGNALS }, (_, i) => `s${i}`);
  const values = Object.fromEntries(keys.map((key, i) => [key, 20 + i / 10]));
  const payload = Buffer.from(JSON.stringify({ ts: new Date(AT).toISOString(), values }));
  const decoder = decoderOf(
    TOPIC,
    keys.map((key) => documentPayload('json', `/values/${key}`, '/ts')),
  );
  const peer = (): void =>
    keys.forEach((key, channel) => {
      const text = new TextDecoder('utf-8', { fatal: true }).decode(payload);
      const { ts, values: found } = JSON.parse(text) as { ts: string; values: Record<string, number> };
      target.take(channel, found[key]!, Date.parse(ts));
    });
  const cost = compare(SIGNALS, () => decoder.decode(TOPIC, payload, target), peer);
  return rowOf(`decode a JSON frame of ${SIGNALS} signals`, cost, 'JSON parsed for each signal');
}

function sparkplugRow(): Row {
  const library = createRequire(import.meta.url)('sparkplug-payload') as { get(namespace: string): Codec };
  const codec = library.get('spBv1.0');
  const names = Array.from({ length: SIGNALS }, (_, i) => `Pump ${i}/Flow`);
  const metric = (i: number) => ({ alias: i, timestamp: AT, type: 'Double', value: 20 + i / 10 });
  const born = names.map((name, i) => ({ ...metric(i), name }));
  const decoder = decoderOf(
    `spBv1.0/plant/+/${DEVICE}`,
    names.map((name) => ({ kind: 'sparkplug', metric: name, good: null })),
  );
  decoder.decode(
    `spBv1.0/plant/DBIRTH/${DEVICE}`,
    codec.encodePayload({ timestamp: AT, metrics: born, seq: 0 }),
    target,
  );
  const payloads = Array.from({ length: 256 }, (_, seq) =>
    codec.encodePayload({ timestamp: AT + seq, metrics: names.map((_, i) => metric(i)), seq }),
  );
  const channels = new Map(names.map((_, i) => [i, i]));
  let turn = 0;
  const ours = (): void => void decoder.decode(`spBv1.0/plant/DDATA/${DEVICE}`, payloads[++turn % 256]!, target);
  const peer = (): void => {
    for (const { alias, value, timestamp } of codec.decodePayload(payloads[++turn % 256]!).metrics)
      target.take(channels.get(Number(alias))!, value, Number(timestamp));
  };
  return rowOf(`decode Sparkplug data of ${SIGNALS} metrics`, compare(SIGNALS, ours, peer), 'sparkplug-payload 1.0.3');
}
