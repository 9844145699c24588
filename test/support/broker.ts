/** Brokers for tests, on free loopback ports: aedes inside this process (MQTT 3.1.1) and Debian's mosquitto (MQTT 5 too). */
import { type ChildProcess, spawn } from 'node:child_process';
import { existsSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { type AddressInfo, createServer, connect as dial, type Server, type Socket } from 'node:net';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { Aedes } from 'aedes';

/** A running broker. */
export interface TestBroker {
  readonly url: string;
  readonly port: number;
  /** Stops it and cuts every connection; what it retained is gone. */
  stop(): Promise<void>;
}

const MOSQUITTO = '/usr/sbin/mosquitto';

/** Null where mosquitto is installed; otherwise why the test is skipped. */
export const mosquittoMissing: string | null = existsSync(MOSQUITTO)
  ? null
  : 'mosquitto is not installed (apt-get install mosquitto)';

/** Ports below the system's own range, one stretch a test worker: nobody else is given one in the meantime. */
const FIRST_PORT = 14_000;
const PORTS_A_WORKER = 4000;
const WORKERS = 4;
let asked = process.pid * 37;

/** A port on which nothing listens, and which neither the system nor another test worker gives away. */
export async function freePort(): Promise<number> {
  const worker = Number(process.env.VITEST_POOL_ID ?? 0) % WORKERS;
  for (let tries = 0; tries < PORTS_A_WORKER; tries++) {
    const port = FIRST_PORT + worker * PORTS_A_WORKER + (asked++ % PORTS_A_WORKER);
    if (await canListen(port)) return port;
  }
  throw new Error(`no free port from ${FIRST_PORT} up`);
}

function canListen(port: number): Promise<boolean> {
  const server = createServer();
  return new Promise((resolve) => {
    server.once('error', () => resolve(false));
    server.listen(port, '127.0.0.1', () => server.close(() => resolve(true)));
  });
}

/** aedes in this process; `port` to come back where an earlier one stood. */
export async function startAedes(port = 0): Promise<TestBroker> {
  const broker = await Aedes.createBroker();
  const sockets = new Set<Socket>();
  const server: Server = createServer((socket) => {
    sockets.add(socket);
    socket.on('close', () => sockets.delete(socket));
    broker.handle(socket);
  });
  await new Promise<void>((resolve, reject) => {
    server.once('error', reject);
    server.listen(port, '127.0.0.1', resolve);
  });
  const bound = (server.address() as AddressInfo).port;
  return {
    url: `mqtt://127.0.0.1:${bound}`,
    port: bound,
    async stop() {
      for (const socket of sockets) socket.destroy();
      await new Promise((resolve) => server.close(resolve));
      await new Promise<void>((resolve) => broker.close(() => resolve()));
    },
  };
}

/** mosquitto as a process of its own; `extra` lines go into its configuration. */
export async function startMosquitto(extra: readonly string[] = [], port = 0): Promise<TestBroker> {
  const bound = port === 0 ? await freePort() : port;
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-mosquitto-'));
  const file = join(folder, 'mosquitto.conf');
  writeFileSync(file, [`listener ${bound} 127.0.0.1`, 'allow_anonymous true', ...extra, ''].join('\n'));
  const child: ChildProcess = spawn(MOSQUITTO, ['-c', file], { stdio: 'ignore' });
  const gone = new Promise<void>((resolve) => child.once('exit', () => resolve()));
  await untilListening(bound);
  return {
    url: `mqtt://127.0.0.1:${bound}`,
    port: bound,
    async stop() {
      child.kill('SIGKILL');
      await gone;
      rmSync(folder, { recursive: true, force: true });
    },
  };
}

async function untilListening(port: number): Promise<void> {
  for (let attempt = 0; attempt < 200; attempt++) {
    const reached = await new Promise<boolean>((resolve) => {
      const socket = dial({ host: '127.0.0.1', port });
      socket.once('connect', () => {
        socket.destroy();
        resolve(true);
      });
      socket.once('error', () => resolve(false));
    });
    if (reached) return;
    await new Promise((resolve) => setTimeout(resolve, 25));
  }
  throw new Error(`nothing listens on 127.0.0.1:${port} after five seconds`);
}
