/** A site whose readings come as Sparkplug metrics and counters: counted by cause, and the same over a restart. */
import { parseHealthMessage, parseSite } from '@stillwell/protocol';
import { expect, test } from 'vitest';
import { BundleKeeper } from '../../runtime/bundle/change.ts';
import { Engine } from '../../runtime/engine.ts';
import { healthPayload } from '../../runtime/publish/health.ts';
import { MemoryDisk } from '../support/memory-disk.ts';
import { trusted } from '../support/running-site.ts';
import { type MadeMetric, sparkplugBytes } from '../support/sparkplug.ts';

const START = Date.UTC(2026, 2, 1);
const site = parseSite(`site: dairy
time_zone: UTC
tick: 1min
horizon: 24
signals:
  - {name: tank, topic: spBv1.0/g/+/n/d, payload: {sparkplug: Level}, unit: m}
  - {name: steam, topic: plc/meter, payload: {json: /c, time: /t, quality: /q}, aggregate: increment, wraps_at: 1000}
`);

function start(disk: MemoryDisk): Engine {
  const options = { site, gateway: 'g1', disk, folder: 'data', segmentTicks: 60, spoolBytes: 1e9, note: () => {} };
  return new Engine(options, new BundleKeeper(disk, 'data', site, trusted));
}

const counters = (engine: Engine): Record<string, unknown> =>
  parseHealthMessage(
    healthPayload({
      ...{ site: 'dairy', gateway: 'g1', nowMs: START, wallTickMs: null, holdsMs: 60_000, status: 'no-bundle' },
      ...{
        lastChange: null,
        engine,
        ship: { sent: 0, resent: 0, parked: 0, conflicts: 0, confirmed: 0 },
        reconnects: 0,
      },
    } as Parameters<typeof healthPayload>[0]),
  ).counters;

function sparkplug(engine: Engine, type: string, n: number, metrics: readonly MadeMetric[]): void {
  const timestamp = START + n * 60_000;
  engine.message(`spBv1.0/g/${type}/n/d`, sparkplugBytes({ timestamp, metrics, seq: n }), timestamp, null);
}

function meter(engine: Engine, n: number, count: number, quality: unknown = 'good'): void {
  const t = START + n * 60_000;
  engine.message('plc/meter', Buffer.from(JSON.stringify({ c: count, t, q: quality })), t, null);
}

const level = (value: number, more: Partial<MadeMetric> = {}): MadeMetric => ({
  alias: 7,
  type: 'Double',
  value,
  ...more,
});

test('refusals are counted by cause, births and gaps beside them', () => {
  const engine = start(new MemoryDisk());
  sparkplug(engine, 'DDATA', 0, [level(1)]);
  sparkplug(engine, 'DBIRTH', 1, [level(2, { name: 'Level' })]);
  sparkplug(engine, 'DDATA', 4, [level(3, { properties: { Quality: { type: 'Int32', value: 0 } } })]);
  sparkplug(engine, 'DDEATH', 5, []);
  meter(engine, 5, 1, 'bad');
  meter(engine, 5, 2);
  expect(counters(engine)).toMatchObject({
    readings: 2,
    refused: { unborn: 1, quality: 2 },
    sparkplug: { births: 1, deaths: 1, gaps: 1, missed: 2, repeated: 0, unreadable: 0 },
  });
});

test('aliases and counters go on over a restart', () => {
  const disk = new MemoryDisk();
  const before = start(disk);
  sparkplug(before, 'DBIRTH', 0, [level(2, { name: 'Level' })]);
  for (let n = 0; n < 4; n++) meter(before, n, 980 + 5 * n);
  before.close(null);
  before.stop();
  const after = start(disk);
  sparkplug(after, 'DDATA', 4, [level(3)]);
  expect(counters(after)).toMatchObject({ readings: 1, refused: {} });
  meter(after, 4, 3);
  meter(after, 6, 9);
  const closed: number[][] = [];
  after.aligner.close(null, ({ tick, values }) => closed.push([tick - START / 60_000, values[1]!]));
  expect(closed).toEqual([
    [2, 5],
    [3, 5],
    [4, 8],
  ]);
});
