/**
 * A gateway process killed at any moment (kill -9) while the plant talks at QoS 1: whatever comes, no reading is lost and
 * none counted twice. Sums and means tell both, and so does what the journal says was folded in.
 */
import { type ChildProcess, spawn } from 'node:child_process';
import { readdirSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import {
  type Bundle,
  encodeBundle,
  formatKey,
  latticeIndex,
  parseForecastsMessage,
  publicHalf,
  sealBundle,
} from '@stillwell/protocol';
import { type Model, modelFromBundle } from '@stillwell/runtime/filter';
import { expect, onTestFinished, test } from 'vitest';
import { type Connection, openConnection } from '../../runtime/mqtt/connection.ts';
import { readWal } from '../../runtime/residuals/wal.ts';
import { replaySegment } from '../../trainer/desk/replay.ts';
import { mosquittoMissing, startMosquitto } from '../support/broker.ts';
import { bundleOfKind, type KindName, proven } from '../support/every-kind.ts';
import { testFolder } from '../support/folder.ts';
import { seededNumbers } from '../support/models.ts';
import { author } from '../support/running-site.ts';
import { until } from '../support/until.ts';

const COMMAND = fileURLToPath(new URL('../../runtime/stillwell-gateway.js', import.meta.url));
const TICK_MS = 1000;
const TICKS = 120;
const PER_TICK = 10;
const START = Date.UTC(2026, 2, 1);
const KILLS = 3;
const NAMES = ['level', 'flow', 'pump'] as const;
const AGGREGATES = ['mean', 'sum', 'mean'] as const;
const INPUTS = 1;

const SITE_TEXT = `site: killed
class: test
time_zone: UTC
tick: 1s
residual_budget: 100000000
horizon: 24
lateness: 2s
${NAMES.map(
  (name, i) => `${i === 0 ? 'signals:\n' : i === NAMES.length - INPUTS ? 'inputs:\n' : ''}  - name: ${name}
    topic: plant/${name}
    payload: { json: /v, time: /t }
    unit: m
    resolution: 0.01
    aggregate: ${AGGREGATES[i]}`,
).join('\n')}
`;

/** A bundle for the site, on its own lattice's thousandths: means of ten readings lie between hundredths. */
function bundleFor(kind: KindName): Bundle {
  const [signals, inputs] = [NAMES.slice(0, -INPUTS), NAMES.slice(-INPUTS)];
  const draft = bundleOfKind(kind, { site: 'killed', tickMs: TICK_MS, signals, inputs, warmupTicks: 0 });
  const channels = draft.channels.map((channel, i) => ({
    ...channel,
    aggregate: AGGREGATES[i]!,
    lattice: { step: 0.001, offset: 0 },
  }));
  return proven({ ...draft, channels });
}

/** Decodes what waits for a desk, which gives the lattice numbers back that were folded in. */
function expectExact(data: string, model: Model, values: Map<number, number[]>): void {
  let state: Uint8Array | null = null;
  let ticks = 0;
  for (const name of readdirSync(join(data, 'spool')).sort()) {
    const replay = replaySegment(new Uint8Array(readFileSync(join(data, 'spool', name))), model, state);
    state = replay.endState;
    const nc = model.channelCount;
    for (let i = 0; i < replay.head.ticks; i++, ticks++) {
      const expected = values.get(replay.head.firstTick + i)!;
      const got = replay.lattice.subarray(i * nc, (i + 1) * nc);
      expect([...got]).toEqual(expected.map((value) => latticeIndex(value, 0.001, 0)));
    }
  }
  expect(ticks).toBeGreaterThan(TICKS / 2);
}

/** Values of one signal in one tick, as the plant says them. */
function valuesOf(tick: number, signal: number): number[] {
  const random = seededNumbers(1 + NAMES.length * tick + signal);
  return Array.from({ length: PER_TICK }, () => Math.round(400 * random()) / 100);
}

async function publishTick(plant: Connection, tick: number): Promise<void> {
  const sent: Promise<void>[] = [];
  for (let i = 0; i < PER_TICK; i++)
    NAMES.forEach((name, signal) => {
      const t = new Date(START + tick * TICK_MS + i * 90).toISOString();
      const payload = JSON.stringify({ v: valuesOf(tick, signal)[i], t });
      sent.push(plant.publish({ topic: `plant/${name}`, payload, qos: 1, retain: false }));
    });
  await Promise.all(sent);
}

/** Every closed tick in the journal files, and how often each stands there. */
function journalled(data: string): { values: Map<number, number[]>; most: number } {
  const values = new Map<number, number[]>();
  const times = new Map<number, number>();
  for (const name of readdirSync(join(data, 'journal')).sort())
    for (const record of readWal(new Uint8Array(readFileSync(join(data, 'journal', name))))!.records) {
      if (record.kind !== 'tick') continue;
      values.set(record.tick, [...record.values]);
      times.set(record.tick, (times.get(record.tick) ?? 0) + 1);
    }
  return { values, most: Math.max(...times.values()) };
}

const testHere = mosquittoMissing === null ? test : test.skip;

testHere.each([
  ['auto', 'linear with all it may have'],
  ['3.1.1', 'featured with a round'],
] as const)(
  'killed in the midst of QoS 1 traffic, nothing is lost or doubled (MQTT %s, %s)',
  async (protocol, kind) => {
    const bundle = bundleFor(kind);
    const broker = await startMosquitto(['max_queued_messages 0', 'set_tcp_nodelay true']);
    onTestFinished(() => broker.stop());
    const folder = testFolder();
    const at = (name: string): string => join(folder, name);
    writeFileSync(at('site.yaml'), SITE_TEXT);
    writeFileSync(at('author.pub'), formatKey(publicHalf(author)));
    writeFileSync(at('first.swb'), sealBundle(encodeBundle(bundle), { epoch: 1, sequence: 1 }, [author]));
    const given = ['--site', at('site.yaml'), '--trust', at('author.pub'), '--bundle', at('first.swb')];
    const where = ['--data', at('data'), '--broker', broker.url, '--gateway', 'g1', '--protocol', protocol];
    const how = ['--clock', 'readings', '--segment-ticks', '50', '--log', 'warn'];
    const start = (): ChildProcess =>
      spawn(process.execPath, [COMMAND, 'run', ...given, ...where, ...how], { stdio: 'inherit' });
    let gateway = start();
    onTestFinished(() => void gateway.kill('SIGKILL'));
    let statuses = 0;
    let newestMs = 0;
    const plant = openConnection({
      url: broker.url,
      clientId: 'plant',
      protocol: 'auto',
      onMessage: (topic, payload) => {
        if (topic.endsWith('/health')) statuses++;
        else newestMs = Math.max(newestMs, parseForecastsMessage(payload).originMs);
      },
    });
    onTestFinished(() => plant.end(true));
    await plant.subscribe(['stillwell/killed/health', 'stillwell/killed/forecasts']);
    await until('the gateway speaks', () => statuses > 0, 20_000);
    const random = seededNumbers(41);
    for (let tick = 0; tick < TICKS; tick++) {
      await publishTick(plant, tick);
      if (tick % Math.floor(TICKS / (KILLS + 1)) !== 15) continue;
      await new Promise((resolve) => setTimeout(resolve, 30 * random()));
      const gone = new Promise((resolve) => gateway.once('exit', resolve));
      gateway.kill('SIGKILL');
      await publishTick(plant, ++tick);
      await gone;
      gateway = start();
      await new Promise((resolve) => setTimeout(resolve, 800 * random()));
    }
    // What follows closes the last of them.
    await publishTick(plant, TICKS + 3);
    await until('the last tick', () => newestMs >= START + (TICKS - 1) * TICK_MS, 20_000);
    const stopped = new Promise((resolve) => gateway.once('exit', resolve));
    gateway.kill('SIGTERM');
    await stopped;
    const { values, most } = journalled(at('data'));
    const first = START / TICK_MS;
    const wrong: string[] = [];
    for (let tick = 0; tick < TICKS; tick++) {
      const sums = NAMES.map((_, signal) => valuesOf(tick, signal).reduce((sum, value) => sum + value, 0));
      const expected = sums.map((sum, signal) => (AGGREGATES[signal] === 'mean' ? sum / PER_TICK : sum));
      const got = values.get(first + tick);
      if (got?.every((value, i) => Math.abs(value - expected[i]!) < 1e-9) !== true)
        wrong.push(`tick ${tick}: expected ${expected}, got ${got}`);
    }
    expect(wrong).toEqual([]);
    expect(most).toBe(1);
    expectExact(at('data'), modelFromBundle(bundle), values);
  },
  60_000,
);
