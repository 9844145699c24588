/** The gateway's program as it is shipped, and how long it takes from start to its subscriptions at a broker. */
import { execFileSync, spawn } from 'node:child_process';
import { type AddressInfo, createServer } from 'node:net';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { Aedes } from 'aedes';
import { type Row, row } from './harness.ts';
import { type ProcessSite, writeProcessSite } from './process-site.ts';

const STARTS = 7;

/** Made anew, and unpacked as it is on a gateway: its first line passes V8's flags. */
export function shipped(folder: string): string {
  const build = fileURLToPath(new URL('../../../runtime/join/build.js', import.meta.url));
  const joined = join(folder, 'joined');
  execFileSync(process.execPath, [build, joined]);
  return join(joined, 'stillwell-gateway.mjs');
}

/** Options of `run` on the files of an invented site. */
export function wordsOf({ site, key, bundle }: ProcessSite, data: string, url: string): string[] {
  const given = ['--site', site, '--trust', key, '--bundle', bundle, '--data', data, '--broker', url];
  return [...given, '--gateway', 'g1', '--log', 'warn'];
}

/** Median of several starts on a data folder that an earlier one left, the one file beside the compiled modules. */
export async function* startRows(command: string, folder: string): AsyncIterable<Row> {
  const files = writeProcessSite(folder, '1min');
  const compiled = fileURLToPath(new URL('../../../runtime/stillwell-gateway.js', import.meta.url));
  const [ours, peer]: [number[], number[]] = [[], []];
  for (let n = 0; n <= STARTS; n++)
    for (const [program, times] of [
      [command, ours],
      [compiled, peer],
    ] as const) {
      const seconds = await startOnce(program, files, join(folder, 'start'));
      if (n > 0) times.push(seconds);
    }
  yield row({
    suite: 'gateway',
    case: 'start to first subscription, median',
    unit: 's',
    ours: median(ours),
    peer: median(peer),
    peerName: 'compiled modules',
    better: 'lower',
    bar: 0.5,
  });
}

async function startOnce(program: string, files: ProcessSite, data: string): Promise<number> {
  const broker = await Aedes.createBroker();
  const server = createServer(broker.handle);
  await new Promise<void>((resolve) => server.listen(0, '127.0.0.1', resolve));
  const url = `mqtt://127.0.0.1:${(server.address() as AddressInfo).port}`;
  const subscribed = new Promise<number>((resolve) => broker.once('subscribe', () => resolve(performance.now())));
  const from = performance.now();
  const child = spawn(program, ['run', ...wordsOf(files, data, url)], { stdio: 'inherit' });
  const ended = new Promise((resolve) => child.once('exit', resolve));
  const seconds = ((await subscribed) - from) / 1000;
  child.kill('SIGTERM');
  await ended;
  await new Promise<void>((resolve) => broker.close(resolve));
  server.close();
  return seconds;
}

function median(values: readonly number[]): number {
  return values.toSorted((a, b) => a - b)[values.length >> 1]!;
}
