/**
 * Segments: bits a reading, headers included, and the time a reading takes. Every forecast is the last value, so the
 * figures are the coder's own; a bundle's forecasts only lower them. Peer: `xz -9` on the same integers, channel after
 * channel, in 16 bits where they fit, cut at the same ticks.
 */
import { spawnSync } from 'node:child_process';
import { existsSync } from 'node:fs';
import { join } from 'node:path';
import { type SegmentOpening, SegmentReader, SegmentWriter } from '@stillwell/protocol';
import { type BenchOptions, type Row, row, timed } from './harness.ts';
import { type IndexSeries, measured, synthetic } from './segment-series.ts';

const LENGTHS = [24, 168, 720, 2880] as const;
const END_STATE = new Uint8Array(64);
/** Bits a reading promised on the deeper lattice in segments of a week and of a month of hours. */
const BARS: Readonly<Record<string, number>> = {
  'ETTh1 deeper step, 168 ticks': 6.2,
  'ETTh1 deeper step, 720 ticks': 5.8,
};
/** Microseconds a reading, coding or decoding. */
const TIME_BAR = 2;

export async function* rows(options: BenchOptions): AsyncIterable<Row> {
  const hasXz = spawnSync('xz', ['--version']).error === undefined;
  if (!hasXz)
    options.note('peer xz is not installed: apt-get install xz-utils (Debian package xz-utils); rows without it');
  for (const series of chosen(options)) {
    for (const length of LENGTHS) yield sizeRow(series, length, hasXz);
    yield* timeRows(series);
  }
  yield dayRow();
  yield row({
    suite: 'segments',
    case: 'header and checksum',
    unit: 'byte',
    ours: emptySize(),
    better: 'lower',
    bar: 110,
  });
}

function chosen({ data, note }: BenchOptions): IndexSeries[] {
  if (data !== null && existsSync(join(data, 'ETTh1.csv'))) return measured(data);
  note(`no ETTh1.csv${data === null ? ' (--data DIR)' : ` in ${data}`}: synthetic series alone`);
  return [synthetic()];
}

function opening(series: IndexSeries, number: number, firstTick: number): SegmentOpening {
  return {
    site: 'north-well',
    gateway: 'gw-0017',
    stream: Uint8Array.of(1, 2, 3, 4, 5, 6, 7, 8),
    number,
    bundle: new Uint8Array(32).fill(0xa5),
    firstTick: 412_345 + firstTick,
    channelCount: series.before.length,
    signalCount: series.before.length,
    residualScaleSteps: series.scales,
    startState: END_STATE,
    keyed: false,
  };
}

/** The whole series in segments of `length` ticks. */
function code(series: IndexSeries, length: number): Uint8Array[] {
  const segments: Uint8Array[] = [];
  let last = series.before;
  for (let from = 0; from < series.rows.length; from += length) {
    const writer = new SegmentWriter(opening(series, segments.length, from));
    for (const now of series.rows.slice(from, from + length)) {
      writer.push(now, last);
      last = now;
    }
    segments.push(writer.finish(END_STATE));
  }
  return segments;
}

/** Decodes and compares: a figure for bytes that do not come back is worth nothing. */
function decode(series: IndexSeries, segments: readonly Uint8Array[]): void {
  const last = series.before.slice();
  const out = new Float64Array(last.length);
  let tick = 0;
  for (const bytes of segments) {
    const reader = new SegmentReader(bytes, series.scales);
    while (reader.next(last, out)) {
      const wanted = series.rows[tick++]!;
      for (let c = 0; c < out.length; c++)
        if (out[c] !== wanted[c])
          throw new Error(`${series.name}: tick ${tick - 1} channel ${c} came back as ${out[c]}`);
      last.set(out);
    }
  }
  if (tick !== series.rows.length) throw new Error(`${series.name}: ${tick} of ${series.rows.length} ticks came back`);
}

function sizeRow(series: IndexSeries, length: number, hasXz: boolean): Row {
  const segments = code(series, length);
  decode(series, segments);
  const readings = series.rows.length * series.before.length;
  const bytes = segments.reduce((sum, segment) => sum + segment.length, 0);
  const name = `${series.name}, ${length} ticks`;
  return row({
    suite: 'segments',
    case: name,
    unit: 'bit/reading',
    ours: (8 * bytes) / readings,
    better: 'lower',
    bar: BARS[name] ?? null,
    ...(hasXz ? { peer: (8 * xzBytes(series, length)) / readings, peerName: 'xz -9, same integers' } : {}),
  });
}

function xzBytes(series: IndexSeries, length: number): number {
  const fits = series.rows.every((now) => now.every((k) => Math.abs(k) < 2 ** 15));
  let bytes = 0;
  for (let from = 0; from < series.rows.length; from += length) {
    const part = series.rows.slice(from, from + length);
    const flat = Array.from(series.before, (_, c) => part.map((now) => now[c]!)).flat();
    const integers = fits ? Int16Array.from(flat) : Int32Array.from(flat);
    const result = spawnSync('xz', ['-9', '-c'], { input: new Uint8Array(integers.buffer), maxBuffer: 2 ** 26 });
    if (result.status !== 0) throw new Error(`xz ended with ${result.status}: ${result.stderr}`);
    bytes += result.stdout.length;
  }
  return bytes;
}

async function* timeRows(series: IndexSeries): AsyncIterable<Row> {
  const readings = series.rows.length * series.before.length;
  const segments = code(series, 720);
  const coding = await timed(5, () => code(series, 720));
  const decoding = await timed(5, () => decode(series, segments));
  for (const [what, { leastCpu }] of [
    ['coding', coding],
    ['decoding', decoding],
  ] as const)
    yield row({
      suite: 'segments',
      case: `${series.name}, ${what}, CPU`,
      unit: 'µs/reading',
      ours: (1e6 * leastCpu) / readings,
      better: 'lower',
      bar: TIME_BAR,
    });
}

/** One MQTT 3.1.1 PUBLISH of QoS 1 and its PUBACK: sections 2.2, 3.3 and 3.4 of the standard. */
function publishBytes(topic: string, payloadBytes: number): number {
  const rest = 2 + topic.length + 2 + payloadBytes;
  return 1 + (rest < 128 ? 1 : rest < 16_384 ? 2 : 3) + rest + 4;
}

/** A day of eight signals, a minute a tick, on the uplink: hourly segments and their receipts, beside each reading in JSON. */
function dayRow(): Row {
  const whole = synthetic();
  const series = { ...whole, rows: whole.rows.slice(0, 1440) };
  const receiptBytes = 110;
  const ours = code(series, 60).reduce(
    (sum, { length }) =>
      sum +
      publishBytes('stillwell/north-well/segments', length) +
      publishBytes('stillwell/north-well/receipts', receiptBytes),
    0,
  );
  let json = 0;
  for (const now of series.rows)
    now.forEach((k, c) => {
      const payload = JSON.stringify({ v: k / 100, t: '2026-01-01T00:00:00Z' });
      json += publishBytes(`plant/north-well/signal-${c}`, payload.length);
    });
  return row({
    suite: 'segments',
    case: 'a day of 8 signals, 1 min, on the link',
    unit: 'byte',
    ours,
    peer: json,
    peerName: 'JSON, a message a reading, QoS 1',
    better: 'lower',
    bar: 0.02,
    barOnRatio: true,
  });
}

/** Bytes of a segment without readings: what each one costs beside them. */
function emptySize(): number {
  return new SegmentWriter(opening(synthetic(), 1000, 0)).finish(END_STATE).length;
}
