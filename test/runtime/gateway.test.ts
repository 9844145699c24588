/** Whole gateways on real brokers: readings in, forecasts out; stops, cuts and changes in between. */
import {
  type ForecastMessage,
  type HealthMessage,
  parseForecastMessage,
  parseForecastsMessage,
  parseHealthMessage,
  parseStateMessage,
  readSegmentHead,
  receiptMessage,
  segmentHash,
  toHex,
  topicsOf,
} from '@stillwell/protocol';
import { afterEach, describe, expect, test } from 'vitest';
import { systemClock } from '../../runtime/clock.ts';
import type { GatewayConfig } from '../../runtime/config.ts';
import { nodeDisk } from '../../runtime/disk.ts';
import { Gateway } from '../../runtime/gateway.ts';
import type { Log } from '../../runtime/log.ts';
import { type Connection, openConnection } from '../../runtime/mqtt/connection.ts';
import { mosquittoMissing, startAedes, startMosquitto, type TestBroker } from '../support/broker.ts';
import { testFolder } from '../support/folder.ts';
import {
  FIRST_TICK,
  plantMessage,
  plantMessages,
  SITE_NAME,
  sealedOf,
  site,
  trusted,
} from '../support/running-site.ts';
import { until } from '../support/until.ts';

const topics = topicsOf('stillwell', SITE_NAME);
const STREAM = new Uint8Array(8).fill(3);
const plant = plantMessages(80);
const FIRST = sealedOf(1);

const open: { stop(): Promise<void> }[] = [];
afterEach(async () => {
  for (const one of open.splice(0).reverse()) await one.stop();
});

interface World {
  broker: TestBroker;
  desk: Connection;
  latest: Map<string, Uint8Array>;
  segments: Uint8Array[];
  log: string[];
}

async function world(started: Promise<TestBroker>): Promise<World> {
  const broker = await started;
  open.push(broker);
  const latest = new Map<string, Uint8Array>();
  const segments: Uint8Array[] = [];
  const desk = openConnection({
    url: broker.url,
    clientId: 'desk',
    protocol: 'auto',
    onMessage: (topic, payload) => {
      latest.set(topic, payload);
      if (topic === topics.segments) segments.push(payload);
    },
  });
  open.push({ stop: () => desk.end(true) });
  await desk.subscribe(['stillwell/#']);
  return { broker, desk, latest, segments, log: [] };
}

function startGateway(
  there: World,
  data: string,
  extra: Partial<GatewayConfig> = {},
  wall: () => number = systemClock.wall,
): Gateway {
  const take = (text: string): void => void there.log.push(text);
  const log: Log = { debug: () => {}, info: take, warn: take, error: take };
  const broker = { url: there.broker.url, protocol: 'auto' as const, username: null, password: null, tls: {} };
  // Where the wall clock is turned on by hand, the monotonic one passes with it.
  const begun = wall === systemClock.wall ? null : wall();
  const monotonic = (): number => systemClock.monotonic() + (begun === null ? 0 : wall() - begun);
  const gateway = new Gateway(
    {
      site,
      gateway: 'g1',
      data,
      broker,
      trusted,
      clock: 'readings',
      segmentTicks: 20,
      spoolBytes: 1e8,
      healthSeconds: 60,
      ...extra,
    },
    {
      clock: { ...systemClock, wall, monotonic },
      disk: nodeDisk,
      log,
      stream: STREAM,
      firstRetryMs: 60,
      willDelaySeconds: 0,
    },
  );
  open.push({ stop: () => gateway.abandon() });
  return gateway;
}

/** Plays ticks [from, to) and waits until the gateway has closed the last of them. */
async function play(there: World, gateway: Gateway, from: number, to: number): Promise<void> {
  await until('connected', () => gateway.isConnected);
  // The pump says once more, in the tick behind, what it says there anyway: that moves the watermark and nothing else.
  const pump = plant[to]!.find((message) => message.topic === 'plant/pump')!;
  const { v } = JSON.parse(Buffer.from(pump.payload).toString()) as { v: number };
  const behind = plantMessage(2, (FIRST_TICK + to) * 60_000 + 31_000, v);
  await Promise.all(
    [...plant.slice(from, to).flat(), behind].map(({ topic, payload }) =>
      there.desk.publish({ topic, payload, qos: 1, retain: false }),
    ),
  );
  await until(`tick ${to - 1}`, () => gateway.engine.aligner.nextTick === FIRST_TICK + to);
}

function forecastOf(there: World): ForecastMessage {
  return parseForecastMessage(there.latest.get(topics.forecast('level'))!);
}

function healthOf(there: World): HealthMessage {
  return parseHealthMessage(there.latest.get(topics.health)!);
}

const brokers: [string, string | null, () => Promise<TestBroker>][] = [
  ['aedes, MQTT 3.1.1', null, () => startAedes()],
  ['mosquitto, MQTT 5', mosquittoMissing, () => startMosquitto()],
];

describe.each(brokers)('on %s', (_, missing, start) => {
  const testHere = missing === null ? test : test.skip;

  testHere('a bundle by topic, readings in, forecasts, state and health out', async () => {
    const there = await world(start());
    const gateway = startGateway(there, testFolder());
    await until('no-bundle health', () => there.latest.has(topics.health));
    expect(healthOf(there)).toMatchObject({ status: 'no-bundle', quality: 'F' });
    await there.desk.publish({ topic: topics.bundle, payload: FIRST, qos: 1, retain: true });
    await until('bundle', () => gateway.engine.serving !== null);
    await play(there, gateway, 0, 30);
    await until('forecast of the last tick', () => Date.parse(forecastOf(there).origin) === (FIRST_TICK + 29) * 60_000);
    const forecast = forecastOf(there);
    expect(forecast).toMatchObject({ signal: 'level', unit: 'm', inputs: 'held', coverage: 0.9, sequence: 1 });
    expect(forecast.median).toHaveLength(24);
    expect(forecast.limits.map((limit) => limit.limit)).toEqual(['high']);
    expect(Date.parse(forecast.valid_until)).toBe((FIRST_TICK + 29 + 5) * 60_000 + 30_000);
    const all = parseForecastsMessage(there.latest.get(topics.forecastAll)!);
    expect(all.signals).toEqual(['level', 'flow']);
    const stateOf = () => parseStateMessage(there.latest.get(topics.state)!);
    await until('state of the last tick', () => stateOf().origin === forecast.origin);
    await until('health of the change', () => healthOf(there).last_change?.outcome === 'changed', 5000);
    await until('running', () => healthOf(there).status === 'running', 5000);
    await gateway.stop();
    await until('stopped', () => healthOf(there).status === 'stopped');
  });

  testHere('stopped, crashed and started again, it ends in the forecasts of a run without a break', async () => {
    const whole = await world(start());
    const wholeFolder = testFolder();
    const through = startGateway(whole, wholeFolder);
    through.offerBundle(FIRST, 'test');
    await play(whole, through, 0, 70);

    const there = await world(start());
    const data = testFolder();
    const first = startGateway(there, data);
    first.offerBundle(FIRST, 'test');
    await play(there, first, 0, 25);
    await first.stop();
    const second = startGateway(there, data);
    await play(there, second, 25, 50);
    await second.abandon();
    const third = startGateway(there, data);
    // The crash came in the middle of a tick; the plant's next readings come as ever.
    await play(there, third, 50, 70);
    await until('same origin', () => forecastOf(there).origin === forecastOf(whole).origin);
    const comparable = ({ issued_at, ...rest }: ForecastMessage) => rest;
    expect(comparable(forecastOf(there))).toEqual(comparable(forecastOf(whole)));
    const stateOf = (one: World) => parseStateMessage(one.latest.get(topics.state)!);
    for (const one of [there, whole])
      await until('state of the same origin', () => stateOf(one).origin === forecastOf(there).origin);
    expect(stateOf(there).state).toEqual(stateOf(whole).state);
    const names = (folder: string) => nodeDisk.list(`${folder}/spool`);
    expect(names(data)).toEqual(names(wholeFolder));
    for (const name of names(data))
      expect(nodeDisk.read(`${data}/spool/${name}`)).toEqual(nodeDisk.read(`${wholeFolder}/spool/${name}`));
  });

  testHere('a vanished gateway leaves its will', async () => {
    const there = await world(start());
    const gateway = startGateway(there, testFolder());
    await until('health', () => there.latest.has(topics.health));
    await gateway.abandon();
    await until('lost', () => healthOf(there).status === 'lost', 15_000);
    expect(healthOf(there)).toMatchObject({ quality: 'F' });
  });
});

test('segments wait for the receipt that names them, outlive broker and gateway, and go', async () => {
  const there = await world(startAedes());
  const data = testFolder();
  const gateway = startGateway(there, data);
  gateway.offerBundle(FIRST, 'test');
  await play(there, gateway, 0, 65);
  await until('three segments', () => there.segments.length >= 3);
  expect(gateway.engine.spool.waiting.map((entry) => entry.number)).toEqual([0, 1, 2]);
  const receipt = (numbers: readonly number[], hash?: Uint8Array) =>
    there.desk.publish({
      topic: topics.receipts,
      payload: receiptMessage({
        site: SITE_NAME,
        gateway: 'g1',
        stream: STREAM,
        segments: numbers.map((number) => {
          const bytes = there.segments.find((one) => readSegmentHead(one).number === number)!;
          return { number, hash: hash ?? segmentHash(bytes) };
        }),
      }),
      qos: 1,
      retain: false,
    });
  await receipt([1], new Uint8Array(32));
  await receipt([0]);
  await until('first gone', () => gateway.engine.spool.waiting.length === 2);
  expect(there.log.some((line) => line.startsWith('segment 1: the desk holds other bytes'))).toBe(true);
  await gateway.stop();
  there.segments.length = 0;
  const again = startGateway(there, data);
  await until('sent again', () => there.segments.length >= 2);
  await receipt([1, 2]);
  await until('all gone', () => again.engine.spool.waiting.length === 0);
  expect(nodeDisk.list(`${data}/spool`)).toEqual([]);
});

test('a bundle by topic changes in mid-run; refused ones leave it and are said once', async () => {
  const there = await world(startAedes());
  const gateway = startGateway(there, testFolder());
  gateway.offerBundle(FIRST, 'test');
  await play(there, gateway, 0, 30);
  const cut = FIRST.slice(0, 500);
  for (let i = 0; i < 2; i++) await there.desk.publish({ topic: topics.bundle, payload: cut, qos: 1, retain: true });
  await until('refusal', () => there.log.some((line) => line.includes('refused (envelope)')));
  await until('refusal in health', () => healthOf(there).last_change?.outcome === 'refused', 5000);
  expect(gateway.engine.serving!.checked.sequence).toBe(1);
  await there.desk.publish({ topic: topics.bundle, payload: sealedOf(2, { seed: 2 }), qos: 1, retain: true });
  await until('change', () => gateway.engine.serving!.checked.sequence === 2);
  await play(there, gateway, 30, 55);
  await until('forecast by the new one', () => forecastOf(there).sequence === 2);
  expect(forecastOf(there).bundle).toBe(toHex(gateway.engine.serving!.checked.digest));
  expect(there.log.filter((line) => line.includes('refused')).length).toBe(1);
  await until('segments', () => there.segments.some((bytes) => readSegmentHead(bytes).firstTick === FIRST_TICK + 30));
  const after = there.segments.map(readSegmentHead).find((head) => head.firstTick === FIRST_TICK + 30)!;
  expect(after.start).toBe('keyed');
});

test('by the wall clock, forecasts come though the plant is silent, and say that they are stale', async () => {
  const there = await world(startAedes());
  let wall = (FIRST_TICK + 5) * 60_000 + 10_000;
  const gateway = startGateway(there, testFolder(), { clock: 'wall' }, () => wall);
  gateway.offerBundle(FIRST, 'test');
  await until('connected', () => gateway.isConnected);
  const first = plantMessage(0, wall - 1000, 10);
  await there.desk.publish({ topic: first.topic, payload: first.payload, qos: 1, retain: false });
  await until('reading', () => gateway.engine.counters.readings === 1);
  wall += 60_000;
  for (let i = 0; i < 7; i++) {
    wall += 60_000;
    await until(`tick ${i}`, () => (gateway.engine.serving?.tick ?? 0) >= FIRST_TICK + 5 + i);
  }
  await until('stale', () => forecastOf(there).quality === 'M');
  expect(forecastOf(there).quality_reason).toMatch(/^level: no reading for \d+ ticks or more$/);
  expect(forecastOf(there).last_reading_at).toBe(new Date((FIRST_TICK + 5) * 60_000 + 9000).toISOString());
  await until('running in health', () => healthOf(there).status === 'running');
});

test('with a clock never set, forecasts carry the time of the readings', async () => {
  const there = await world(startAedes());
  const gateway = startGateway(there, await testFolder(), { clock: 'wall' }, () => 1000);
  gateway.offerBundle(FIRST, 'from a file');
  await play(there, gateway, 0, 5);
  await until('forecast', () => there.latest.has(topics.forecast('level')));
  await until('of the last tick', () => Date.parse(forecastOf(there).origin) === (FIRST_TICK + 4) * 60_000);
  const { issued_at, valid_until } = forecastOf(there);
  expect(Date.parse(issued_at)).toBeGreaterThanOrEqual((FIRST_TICK + 5) * 60_000);
  expect(Date.parse(issued_at)).toBeLessThan(Date.parse(valid_until));
});
