/**
 * A gateway as a process of its own on mosquitto, as the one file that is shipped: how much memory stays
 * resident after many ticks, how long from tick close to the last forecast in a subscriber's hands, how fast a backlog
 * of readings is worked off.
 */
import { type ChildProcess, spawn } from 'node:child_process';
import { existsSync, mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { type AddressInfo, createServer } from 'node:net';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { parseForecastsMessage } from '@stillwell/protocol';
import { type Connection, openConnection } from '@stillwell/runtime/mqtt';
import { shipped, startRows, wordsOf } from './gateway-start.ts';
import { type BenchOptions, type Row, row } from './harness.ts';
import { type ProcessSite, readingOf, SIGNALS, writeProcessSite } from './process-site.ts';

const MOSQUITTO = '/usr/sbin/mosquitto';
const MEMORY_TICKS = 10_000;
const AHEAD_TICKS = 50;
const LATENCY_TICK_MS = 250;
const LATENCY_TICKS = 120;
/** The first ticks run on code not yet compiled and are not counted. */
const UNCOUNTED_TICKS = 20;

/** Rows of the process; none, with a word why, where mosquitto is not installed. */
export async function* processRows(options: BenchOptions): AsyncIterable<Row> {
  if (!existsSync(MOSQUITTO)) {
    options.note('gateway process: left out, mosquitto is not installed (apt-get install mosquitto)');
    return;
  }
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-bench-'));
  const broker = await startBroker(folder);
  try {
    const command = shipped(folder);
    yield* startRows(command, folder);
    yield* memoryRows(command, folder, broker.url);
    for (const [signals, bar] of [
      [8, 80],
      [64, 100],
    ] as const)
      yield* latencyRows(command, folder, broker.url, signals, bar);
  } finally {
    broker.child.kill('SIGKILL');
    rmSync(folder, { recursive: true, force: true });
  }
}

async function* memoryRows(command: string, folder: string, url: string): AsyncIterable<Row> {
  const files = writeProcessSite(folder, '1min');
  const gateway = startGateway(command, files, join(folder, 'memory'), url, ['--clock', 'readings']);
  const plant = openConnection({ url, clientId: 'plant', protocol: 'auto' });
  try {
    const watch = await watchForecasts(url, 'memory-watch');
    await plant.firstConnect(10_000);
    await untilRunning(plant, watch, Date.UTC(2026, 0, 1));
    const from = Date.UTC(2026, 0, 2);
    const started = performance.now();
    for (let n = 0; n < MEMORY_TICKS; n++) {
      await publishTick(plant, from + n * 60_000);
      // A broker drops what its queue cannot hold, acknowledged or not: no further ahead than that.
      if (n % AHEAD_TICKS === 0) await until(() => watch.originMs() >= from + (n - AHEAD_TICKS) * 60_000);
    }
    await until(() => watch.originMs() >= from + (MEMORY_TICKS - 2) * 60_000);
    const seconds = (performance.now() - started) / 1000;
    const resident = residentMb(gateway.pid!);
    yield row({
      suite: 'gateway',
      case: `resident, ${SIGNALS} signals, ${MEMORY_TICKS} ticks flat out`,
      unit: 'MB',
      ours: resident,
      better: 'lower',
    });
    const perSecond = (MEMORY_TICKS * SIGNALS) / seconds;
    yield row({
      suite: 'gateway',
      case: 'replay through the broker',
      unit: 'readings/s',
      ours: perSecond,
      better: 'higher',
    });
    await watch.connection.end();
  } finally {
    await plant.end();
    await stop(gateway);
  }
}

async function* latencyRows(
  command: string,
  folder: string,
  url: string,
  signals: number,
  bar: number,
): AsyncIterable<Row> {
  const files = writeProcessSite(folder, `${LATENCY_TICK_MS}ms`, signals);
  const gateway = startGateway(command, files, join(folder, `latency-${signals}`), url, []);
  const plant = openConnection({ url, clientId: 'plant', protocol: 'auto' });
  try {
    const watch = await watchForecasts(url, 'latency-watch');
    await plant.firstConnect(10_000);
    const feed = setInterval(() => void publishTick(plant, Date.now(), signals), LATENCY_TICK_MS);
    await until(() => watch.delays.length >= UNCOUNTED_TICKS + LATENCY_TICKS, 120_000);
    clearInterval(feed);
    yield row({
      suite: 'gateway',
      case: `resident, ${signals} signals, in real time`,
      unit: 'MB',
      ours: residentMb(gateway.pid!),
      better: 'lower',
      bar,
    });
    const delays = watch.delays.slice(UNCOUNTED_TICKS).sort((a, b) => a - b);
    const quantile = (p: number): number => delays[Math.min(delays.length - 1, Math.floor(p * delays.length))]!;
    for (const [name, p, most] of [
      ['p50', 0.5, null],
      ['p99', 0.99, 20],
    ] as const)
      yield row({
        suite: 'gateway',
        case: `tick close to forecast received, ${signals} signals, ${name}`,
        unit: 'ms',
        ours: quantile(p),
        better: 'lower',
        bar: signals === SIGNALS ? most : null,
      });
    await watch.connection.end();
  } finally {
    await plant.end();
    await stop(gateway);
  }
}

interface Watch {
  readonly connection: Connection;
  /** Ms from the close of each tick to its compact forecast, which follows those of the signals. */
  readonly delays: number[];
  readonly originMs: () => number;
}

async function watchForecasts(url: string, clientId: string): Promise<Watch> {
  const delays: number[] = [];
  let origin = Number.NEGATIVE_INFINITY;
  const connection = openConnection({
    url,
    clientId,
    protocol: 'auto',
    onMessage: (_, payload, { retain }) => {
      const now = performance.timeOrigin + performance.now();
      const { originMs, tickMs } = parseForecastsMessage(payload);
      if (retain || originMs <= origin) return;
      origin = originMs;
      delays.push(now - (originMs + tickMs));
    },
  });
  await connection.subscribe(['stillwell/bench-site/forecasts']);
  return { connection, delays, originMs: () => origin };
}

/** The process needs a moment to subscribe: readings go out until the first forecast comes back. */
async function untilRunning(plant: Connection, watch: Watch, fromMs: number): Promise<void> {
  for (let n = 0; watch.originMs() < fromMs; n++) {
    await publishTick(plant, fromMs + n * 60_000);
    await new Promise((resolve) => setTimeout(resolve, 50));
    if (n > 600) throw new Error('the gateway process gave no forecast within half a minute');
  }
}

async function publishTick(plant: Connection, timeMs: number, signals = SIGNALS): Promise<void> {
  const sent: Promise<void>[] = [];
  for (let i = 0; i < signals; i++)
    sent.push(plant.publish({ topic: `plant/s${i}`, payload: readingOf(i, timeMs), qos: 1, retain: false }));
  await Promise.all(sent);
}

function startGateway(
  command: string,
  files: ProcessSite,
  data: string,
  url: string,
  extra: readonly string[],
): ChildProcess {
  return spawn(command, ['run', ...wordsOf(files, data, url), ...extra], { stdio: 'inherit' });
}

async function stop(child: ChildProcess): Promise<void> {
  const gone = new Promise((resolve) => child.once('exit', resolve));
  if (child.exitCode === null) {
    child.kill('SIGTERM');
    await gone;
  }
}

/** VmRSS, proc(5). */
function residentMb(pid: number): number {
  const kib = /^VmRSS:\s+(\d+) kB/m.exec(readFileSync(`/proc/${pid}/status`, 'utf8'))?.[1];
  return (Number(kib) * 1024) / 1e6;
}

async function startBroker(folder: string): Promise<{ url: string; child: ChildProcess }> {
  const server = createServer();
  await new Promise<void>((resolve) => server.listen(0, '127.0.0.1', resolve));
  const { port } = server.address() as AddressInfo;
  await new Promise((resolve) => server.close(resolve));
  const file = join(folder, 'mosquitto.conf');
  writeFileSync(file, `listener ${port} 127.0.0.1\nallow_anonymous true\nset_tcp_nodelay true\n`);
  const child = spawn(MOSQUITTO, ['-c', file], { stdio: 'ignore' });
  await new Promise((resolve) => setTimeout(resolve, 300));
  return { url: `mqtt://127.0.0.1:${port}`, child };
}

async function until(claim: () => boolean, timeoutMs = 300_000): Promise<void> {
  const end = performance.now() + timeoutMs;
  while (!claim()) {
    if (performance.now() > end) throw new Error(`gateway process: nothing more came within ${timeoutMs / 1000} s`);
    await new Promise((resolve) => setTimeout(resolve, 2));
  }
}
