/** Captures are read as the gateway reads: quality, units, scale, wraps, Sparkplug births; columns hold what the model sees. */
import { afterAll, expect, it } from 'vitest';
import { documentPayload } from '../../../protocol/index.ts';
import { loadHistory } from '../../../trainer/history/load.ts';
import { sparkplugBytes } from '../../support/sparkplug.ts';
import { Folder, signal, site } from './support.ts';

const folder = new Folder();
afterAll(() => folder.remove());

const minute = (n: number): string => new Date(Date.UTC(2024, 0, 1, 0, n)).toISOString();
const written = (name: string, lines: readonly object[]): string =>
  folder.write(name, lines.map((line) => JSON.stringify(line)).join('\n'));

it('quality, units and scale of a capture', async () => {
  const frame = (n: number, a: number, q: number) => ({
    time: minute(n),
    topic: 'plc',
    payload: JSON.stringify({ a, q }),
  });
  const path = written('quality.ndjson', [frame(0, 320, 192), frame(1, 9999, 0), frame(2, 2120, 192)]);
  const payload = { ...documentPayload('json', '/a'), quality: '/q', good: [192] };
  const asked = site([signal('t', { topic: 'plc', payload, unit: 'Cel', sentIn: '[degF]', scale: 0.1 })]);
  const { series, history } = await loadHistory([path], asked, { zone: null });
  expect([...series.values[0]!]).toEqual([0, Number.NaN, 100]);
  expect(history.files[0]!.passedOver).toEqual({ 'payload of t not of good quality': 1 });
});

it('Sparkplug metrics of a capture, as base64, by alias after their birth', async () => {
  const line = (n: number, type: string, metrics: Parameters<typeof sparkplugBytes>[0]['metrics']) => ({
    time: minute(n),
    topic: `spBv1.0/g/${type}/n/d`,
    encoding: 'base64',
    payload: Buffer.from(sparkplugBytes({ timestamp: Date.parse(minute(n)), seq: n, metrics: metrics ?? [] })).toString(
      'base64',
    ),
  });
  const data = (value: number) => [{ alias: 3, type: 'Double', value }];
  const path = written('sparkplug.ndjson', [
    line(0, 'DDATA', data(9)),
    line(1, 'DBIRTH', [{ name: 'Level', alias: 3, type: 'Double', value: 1 }]),
    line(2, 'DDATA', data(2)),
    line(3, 'DDATA', data(4)),
  ]);
  const asked = site([
    signal('level', { topic: 'spBv1.0/g/+/n/d', payload: { kind: 'sparkplug', metric: 'Level', good: null } }),
  ]);
  const { series, history } = await loadHistory([path], asked, { zone: null });
  expect([...series.values[0]!]).toEqual([1, 2, 4]);
  expect(history.files[0]!.passedOver).toEqual({ 'payload of level before the birth that explains it': 1 });
});

it('columns are in the unit, neither scaled nor converted; counters wrap where scale puts their end', async () => {
  const rows = [65_000, 65_500, 100, 200].map((count, n) => `${minute(n)},${count / 10},${20 + n}`);
  const path = folder.write('wide.csv', ['time,meter,t', ...rows].join('\n'));
  const asked = site([
    signal('meter', { aggregate: 'increment', scale: 0.1, wrapsAt: 65_536, resolution: 0.1 }),
    signal('t', { unit: 'Cel', sentIn: '[degF]', scale: 0.1 }),
  ]);
  const { series } = await loadHistory([path], asked, { zone: null });
  const [meter, t] = series.values as [Float64Array, Float64Array];
  expect([...meter].map((value) => Number(value.toFixed(6)))).toEqual([Number.NaN, 50, 13.6, 10]);
  expect([...t]).toEqual([20, 21, 22, 23]);
});
